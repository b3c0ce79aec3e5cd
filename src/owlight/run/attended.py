"""Stopping: handlers only count; waits are cut into slices that beat the guard and look at the count.

Once: the point in hand is finished. Twice: the safe state now. Three times: the process leaves and the guard acts.
"""

from __future__ import annotations

import os
import signal
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from types import FrameType

from owlight.clock import Clock
from owlight.errors import StopNow

SLICE_S = 0.1
_EXIT_STOPPED = 130
_FINISHING = "Finishing this point, then making the bench safe; press again to make it safe at once."
_AT_ONCE = "Making the bench safe now."


class StopRequests:
    """How often a person asked to stop. A stop file, written from another shell, counts as asking twice."""

    def __init__(self, stop_file: Path | None = None, say: Callable[[str], None] = lambda words: None) -> None:
        self.level = 0
        self._said = 0
        self._stop_file = stop_file
        self._say = say

    def ask(self, at_least: int | None = None) -> None:
        """May be called in the middle of anything, even of a line on the screen: so it says nothing itself."""
        self.level = max(self.level + 1, at_least or 0)
        if self.level > 2:
            # the guard process sees the pipe end and makes the bench safe over links of its own
            os._exit(_EXIT_STOPPED)

    def look(self) -> None:
        if self.level < 2 and self._stop_file is not None and self._stop_file.exists():
            self.ask(at_least=2)
        if self.level > self._said:
            self._said = self.level
            self._say(_AT_ONCE if self.level >= 2 else _FINISHING)

    @contextmanager
    def on_signals(self) -> Iterator[None]:
        """Ctrl-C counts one; SIGTERM and a closed terminal ask for the safe state at once."""

        def count(number: int, frame: FrameType | None) -> None:
            self.ask()

        def at_once(number: int, frame: FrameType | None) -> None:
            self.ask(at_least=2)

        wanted = {"SIGINT": count, "SIGTERM": at_once, "SIGHUP": at_once, "SIGBREAK": at_once}
        present = {getattr(signal, name): act for name, act in wanted.items() if hasattr(signal, name)}
        before = {number: signal.signal(number, act) for number, act in present.items()}
        try:
            yield
        finally:
            for number, act in before.items():
                signal.signal(number, act)


class AttendedClock:
    """A clock whose waits beat the guard and end with StopNow once a person asked for the safe state."""

    def __init__(self, clock: Clock, stop: StopRequests, guard_beat: Callable[[], None], real_time: bool) -> None:
        self._clock = clock
        self._stop = stop
        self._guard_beat = guard_beat
        # a stepped clock does not sleep: cutting its waits would only cost messages
        self._slice_s = SLICE_S if real_time else float("inf")
        self._made_safe = False

    def utc(self) -> str:
        return self._clock.utc()

    def monotonic_s(self) -> float:
        return self._clock.monotonic_s()

    def beat(self) -> None:
        """A sign of life to the guard; never raises StopNow, so it may be called inside an exchange."""
        self._guard_beat()
        self._stop.look()

    def sleep(self, seconds: float) -> None:
        left_s = seconds
        while True:
            self.checkpoint()
            if left_s <= 0:
                return
            self._clock.sleep(min(left_s, self._slice_s))
            left_s -= self._slice_s

    def checkpoint(self) -> None:
        self.beat()
        if self._stop.level >= 2 and not self._made_safe:
            raise StopNow

    def only_beat(self) -> None:
        """From here on a stop no longer interrupts: making the bench safe must not be skipped."""
        self._made_safe = True
