"""The only place that may ask the time: bench time is passed in, so that a test or a simulation can step it."""

from __future__ import annotations

import time
from datetime import UTC, datetime, timedelta
from typing import Protocol


class Clock(Protocol):
    """Bench time. Durations come from `monotonic_s`, people read `utc`, order comes from the stamp's count."""

    def utc(self) -> str: ...

    def monotonic_s(self) -> float: ...

    def sleep(self, seconds: float) -> None: ...


def iso_utc(moment: datetime) -> str:
    """ISO 8601 in UTC with microseconds, ending in Z: sorts as text."""
    return moment.astimezone(UTC).strftime("%Y-%m-%dT%H:%M:%S.%fZ")


class WallClock:
    """Time as it passes in the laboratory."""

    def utc(self) -> str:
        return iso_utc(datetime.now(UTC))

    def monotonic_s(self) -> float:
        return time.monotonic()

    def sleep(self, seconds: float) -> None:
        time.sleep(seconds)


class ManualClock:
    """Time that moves only when someone sleeps; for tests.

    >>> clock = ManualClock()
    >>> clock.sleep(90.0)
    >>> clock.monotonic_s(), clock.utc()
    (90.0, '2026-01-01T00:01:30.000000Z')
    """

    def __init__(self, start: datetime = datetime(2026, 1, 1, tzinfo=UTC)) -> None:
        self._start = start
        self._elapsed_s = 0.0

    def utc(self) -> str:
        return iso_utc(self._start + timedelta(seconds=self._elapsed_s))

    def monotonic_s(self) -> float:
        return self._elapsed_s

    def sleep(self, seconds: float) -> None:
        self._elapsed_s += seconds
