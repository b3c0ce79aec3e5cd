"""Stamps of one bench: their count gives the order of everything that happened on it."""

from __future__ import annotations

from owlight.clock import Clock
from owlight.vocabulary.values import Stamp


class Stamper:
    """
    >>> from owlight.clock import ManualClock
    >>> stamper = Stamper(ManualClock())
    >>> stamper.stamp().count, stamper.stamp().count
    (1, 2)
    """

    def __init__(self, clock: Clock) -> None:
        self._clock = clock
        self._count = 0

    def stamp(self) -> Stamp:
        self._count += 1
        return Stamp(self._clock.utc(), self._clock.monotonic_s(), self._count)
