"""The points of nested sweeps, and the order in which each pass visits them."""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator

from owlight.sequence import Axis, Sequence
from owlight.vocabulary.plan import Point
from owlight.vocabulary.seeds import seed_for
from owlight.vocabulary.values import Setting


def points_of(sequence: Sequence) -> tuple[Point, ...]:
    """Every combination, outermost axis first, in the order of the file; the reference point comes last."""
    combinations = itertools.product(*(axis.values for axis in sequence.axes))
    terms = [axis.term for axis in sequence.axes]
    points = [Point(index, tuple(map(Setting, terms, values))) for index, values in enumerate(combinations)]
    if sequence.reference is not None:
        points.append(Point(len(points), sequence.reference.settings, reference=True))
    return tuple(points)


def order_of(sequence: Sequence, seed: int) -> tuple[tuple[int, ...], ...]:
    """Point indices of each pass. The reference is visited first and after every so many stays, across passes."""
    stays = 0
    passes = []
    for number in range(sequence.stop.passes):
        indices: list[int] = [] if number or sequence.reference is None else [_reference_index(sequence)]
        for index in _one_pass(sequence.axes, seed, number):
            indices.append(index)
            stays += 1
            if sequence.reference is not None and stays % sequence.reference.every == 0:
                indices.append(_reference_index(sequence))
        passes.append(tuple(indices))
    return tuple(passes)


def _reference_index(sequence: Sequence) -> int:
    return math.prod(len(axis.values) for axis in sequence.axes)


def _one_pass(axes: tuple[Axis, ...], seed: int, number: int) -> Iterator[int]:
    sizes = [len(axis.values) for axis in axes]
    for places in _visits(axes, seed, number, ()):
        index = 0
        for size, place in zip(sizes, places, strict=True):
            index = index * size + place
        yield index


def _visits(axes: tuple[Axis, ...], seed: int, number: int, outer: tuple[int, ...]) -> Iterator[tuple[int, ...]]:
    if len(outer) == len(axes):
        yield outer
        return
    for place in _axis_order(axes[len(outer)], seed, number, outer):
        yield from _visits(axes, seed, number, (*outer, place))


def _axis_order(axis: Axis, seed: int, number: int, outer: tuple[int, ...]) -> list[int]:
    places = list(range(len(axis.values)))
    if axis.order == "as listed":
        return places
    if axis.order == "shuffled":
        return sorted(places, key=lambda place: seed_for(seed, "shuffle", len(outer), place))
    if axis.order == "shuffled passes":
        return sorted(places, key=lambda place: seed_for(seed, "shuffled pass", number, *outer, place))
    rising = sorted(places, key=lambda place: axis.values[place])
    return {"ascending": rising, "descending": rising[::-1], "up-down": rising + rising[::-1]}[axis.order]
