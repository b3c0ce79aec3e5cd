"""The tributaries apart: X and Y by hue, I solid and Q dashed."""

from __future__ import annotations

import math
from collections import defaultdict

from owlight.quantity import dbm
from owlight.report import drawing as d
from owlight.report.curve_figure import Size
from owlight.report.facts import Facts
from owlight.report.markup import Markup

Counts = dict[str, list[tuple[float, int, int]]]


def tributary_figure(facts: Facts, size: Size) -> Markup | None:
    """Only for a single curve, and only points with errors; a pooled curve can hide one bad lane."""
    if len({stay.group for stay in facts.stays}) != 1:
        return None
    curves = {
        name: [(p, math.log10(errors / bits)) for p, errors, bits in sorted(rows) if errors]
        for name, rows in _by_tributary(facts).items()
    }
    every = [place for places in curves.values() for place in places]
    if len(curves) < 2 or len({p for p, _ in every}) < 2:
        return None
    powers, levels = [p for p, _ in every], [b for _, b in every]
    x = d.Axis(min(powers) - 0.1, max(powers) + 0.1, size.left, size.width - 14)
    frame = d.Frame(x, d.Axis(min(levels) - 0.15, max(levels) + 0.15, size.height - 44, 52))
    marks = frame.decades(7 if size.width > 500 else 4)
    for name, places in curves.items():
        marks.append(d.path([(frame.x.at(p), frame.y.at(b)) for p, b in places], f"lane {_look(name)}"))
    marks += _legend(tuple(curves), size)
    marks.append(d.text(size.left, 16, "bit error ratio of each tributary", "title"))
    marks.append(d.text(frame.x.end, size.height - 6, "received power / dBm", "title end"))
    words = f"Bit error ratio of the tributaries {', '.join(curves)} against received power."
    return d.drawing(marks, size.width, size.height, words, size.kind)


def _by_tributary(facts: Facts) -> Counts:
    """Summed over the stays of a point, at the mean power of the point."""
    errors: defaultdict[tuple[str, int], int] = defaultdict(int)
    bits: defaultdict[tuple[str, int], int] = defaultdict(int)
    powers: defaultdict[int, list[float]] = defaultdict(list)
    for stay in facts.stays:
        if stay.reference or not stay.tributaries:
            continue
        powers[stay.point].append(stay.received_power_w)
        for t in stay.tributaries:
            errors[t.name, stay.point] += t.errors
            bits[t.name, stay.point] += t.bits
    found: Counts = defaultdict(list)
    for (name, point), counted in bits.items():
        mean_w = sum(powers[point]) / len(powers[point])
        found[name].append((dbm(mean_w), errors[name, point], counted))
    return found


def _look(name: str) -> str:
    polarisation = "y" if name.startswith("Y") else "x"
    return f"{polarisation} {'dashed' if name.endswith('Q') else 'solid'}"


def _legend(names: tuple[str, ...], size: Size) -> list[Markup]:
    marks = []
    for number, name in enumerate(names):
        left = size.left + number * 66
        marks.append(d.line(left, 34, left + 26, 34, f"lane {_look(name)}"))
        marks.append(d.text(left + 32, 38, name, "tick"))
    return marks
