"""The time of the simulated bench: stepped by declared latencies and by whoever waits, or as it passes on the wall."""

from __future__ import annotations

import threading
import time
from collections.abc import Callable

_SLICE_S = 0.05


class Cleared(Exception):  # noqa: N818  it is no error
    """A device clear ended what was going on."""


class BenchTime:
    """All instruments share one, and its lock: whoever waits on the wall lets the others go on meanwhile."""

    def __init__(self, stepped: bool) -> None:
        self.stepped = stepped
        self.lock = threading.Condition(threading.RLock())
        self._stepped_s = 0.0
        self._began_s = time.monotonic()

    def now_s(self) -> float:
        return self._stepped_s if self.stepped else time.monotonic() - self._began_s

    def restart(self) -> None:
        self._stepped_s = 0.0
        self._began_s = time.monotonic()

    def advance(self, seconds: float) -> None:
        """Only stepped time can be moved; ValueError otherwise."""
        if not self.stepped or not seconds >= 0.0:
            raise ValueError("time can only be advanced forwards, and only in stepped mode")
        self._stepped_s += seconds

    def let_pass(self) -> None:
        """From now on time passes on the wall: nobody is left to step it."""
        self._began_s = time.monotonic() - self.now_s()
        self.stepped = False

    def wait_until(self, moment_s: float, cleared: Callable[[], bool]) -> None:
        """Cleared if a device clear came meanwhile. The caller holds the lock; on the wall it is free while waiting."""
        if self.stepped:
            self._stepped_s = max(self._stepped_s, moment_s)
            return
        while (left_s := moment_s - self.now_s()) > 0.0:
            if cleared():
                raise Cleared
            self.lock.wait(min(left_s, _SLICE_S))
