"""Slow drift as a function of planned time: a sum of sinusoids, so that it can be asked for at any time, in any order.

A random walk taken in steps would depend on the steps.
"""

from __future__ import annotations

import math
from functools import lru_cache

from owlight.simulation.optics.keys import generator
from owlight.simulation.world import Drift

_SINUSOIDS = 8


def drifted(drift: Drift, purpose: str, amount: float, planned_time_s: float) -> float:
    """A value that wanders about zero with the standard deviation `amount`."""
    if amount == 0.0:
        return 0.0
    # sinusoids of equal power; each has a mean square of one half
    scale = amount * math.sqrt(2.0 / _SINUSOIDS)
    waves = _waves(drift.seed, purpose, drift.fastest_s, drift.slowest_s)
    return scale * sum(math.sin(2 * math.pi * planned_time_s / period_s + phase) for period_s, phase in waves)


@lru_cache(maxsize=64)
def _waves(seed: int, purpose: str, fastest_s: float, slowest_s: float) -> tuple[tuple[float, float], ...]:
    """Periods in even steps of their logarithm, each a little off, so that nothing comes back within a night."""
    rng = generator(seed, f"drift/{purpose}")
    step = math.log(slowest_s / fastest_s) / (_SINUSOIDS - 1)
    places = (index + rng.uniform(-0.4, 0.4) * (0 < index < _SINUSOIDS - 1) for index in range(_SINUSOIDS))
    return tuple((fastest_s * math.exp(step * place), rng.uniform(0.0, 2 * math.pi)) for place in places)
