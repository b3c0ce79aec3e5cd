"""The slope of a reading in time, with its uncertainty."""

from __future__ import annotations

import math
from collections.abc import Sequence

from owlight.vocabulary.values import Reading


def slope(readings: Sequence[Reading], over_s: float) -> tuple[float, float]:
    """Least-squares drift of a power over `over_s` seconds in dB, and its standard uncertainty in dB.

    Readings are in watts; one at or below zero has no level, so the drift is then unknown (infinite uncertainty).
    Source: straight-line least squares, NIST/SEMATECH e-Handbook of Statistical Methods, chapter 4 (from memory).

    >>> from owlight.vocabulary.values import Stamp, Term
    >>> power = Term("power_meter", "power")
    >>> rising = [Reading(Stamp("", float(t), t), power, 1e-3 * 10 ** (0.01 * t / 10)) for t in range(10)]
    >>> drift_db, u_db = slope(rising, over_s=5.0)
    >>> round(drift_db, 9), u_db < 1e-9
    (0.05, True)
    """
    if len(readings) < 3 or any(r.value is None or r.value <= 0 for r in readings):
        return math.inf, math.inf
    times_s = [r.at.monotonic_s for r in readings]
    levels_db = [10 * math.log10(r.value or 1.0) for r in readings]
    middle_s = sum(times_s) / len(times_s)
    mean_db = sum(levels_db) / len(levels_db)
    spread = sum((t - middle_s) ** 2 for t in times_s)
    if spread == 0:
        return math.inf, math.inf
    gradient = sum((t - middle_s) * (p - mean_db) for t, p in zip(times_s, levels_db, strict=True)) / spread
    rest = sum((p - mean_db - gradient * (t - middle_s)) ** 2 for t, p in zip(times_s, levels_db, strict=True))
    return gradient * over_s, math.sqrt(max(rest, 0.0) / (len(readings) - 2) / spread) * over_s
