"""Readings pooled: one mean a term, with the scatter of every single reading behind it."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence

from owlight.vocabulary.values import Reading, Term


def mean_readings(readings: Iterable[Reading]) -> tuple[Reading, ...]:
    """One Reading a term, in the order in which the terms first come: mean, standard deviation, number of readings.

    Value and deviation stay in the term's unit, and are those of all single readings together: the sum of squares
    within each given mean and between the means (the identity of the analysis of variance). A reading that gave no
    number is left out; the value is None where none gave one, the deviation None where it cannot be told: of a single
    reading, or of a mean that came without its own.

    >>> from owlight.vocabulary.values import Reading, Stamp, Term
    >>> at, meter = Stamp("", 0.0, 1), Term("power_meter", "power")
    >>> mean, = mean_readings([Reading(at, meter, 1e-6), Reading(at, meter, 3e-6, 1e-6, 2)])
    >>> mean.count, round(mean.value * 1e6, 3), round(mean.standard_deviation * 1e6, 3)
    (3, 2.333, 1.354)
    """
    by_term: dict[Term, list[Reading]] = {}
    for reading in readings:
        by_term.setdefault(reading.term, []).append(reading)
    return tuple(_pooled(found) for found in by_term.values())


def _pooled(readings: Sequence[Reading]) -> Reading:
    told = [(r.value, r.standard_deviation, r.count) for r in readings if r.value is not None]
    number = sum(count for _, _, count in told)
    if not number:
        return Reading(readings[0].at, readings[0].term, None, None, 0)
    mean = sum(count * value for value, _, count in told) / number
    deviation = None
    if number > 1 and all(sd is not None or count == 1 for _, sd, count in told):
        squares = sum((count - 1) * (sd or 0.0) ** 2 + count * (value - mean) ** 2 for value, sd, count in told)
        deviation = math.sqrt(squares / (number - 1))
    return Reading(readings[0].at, readings[0].term, mean, deviation, number)
