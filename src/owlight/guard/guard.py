"""The runner's side: start the guard, give signs of life, say when it is over."""

from __future__ import annotations

import os
import subprocess
import sys
import time
from contextlib import suppress
from pathlib import Path

from owlight import shipped
from owlight.errors import BenchError
from owlight.guard.orders import BEAT, DONE, READY, TAKE_OVER, Orders
from owlight.vocabulary.plan import SafeStep

_EVERY_S = 0.1
_END_S = 8.0  # longer than the three steps of two seconds that a guard may need


class Guard:
    """`beat` comes from the runner's waits and not from a thread: a thread would beat on while the runner hangs."""

    def __init__(self, process: subprocess.Popen[str], every_s: float) -> None:
        self._process = process
        self._every_s = every_s
        self._beaten_s = 0.0
        self._over = False

    @staticmethod
    def start(steps: tuple[SafeStep, ...], silence_s: float, log: Path, end_after_s: float | None) -> Guard:
        """Returns when the guard is on watch."""
        process = subprocess.Popen(
            [sys.executable, "-m", "owlight.guard"],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.DEVNULL,
            text=True,
            env=_surroundings(),
            start_new_session=True,  # Ctrl-C is for the runner
        )
        orders = Orders(steps, silence_s, os.getpid(), str(log.resolve()), end_after_s)
        guard = Guard(process, min(_EVERY_S, silence_s / 10))
        if not guard._say(orders.to_line()) or process.stdout is None or process.stdout.readline().strip() != READY:
            process.kill()
            raise BenchError("The guard process did not start. Nothing was set; look at the installation.")
        # a guard that hangs must not stop the runner at a full pipe
        if process.stdin is not None and os.name == "posix":
            os.set_blocking(process.stdin.fileno(), False)
        return guard

    @property
    def alive(self) -> bool:
        return self._process.poll() is None

    def beat(self) -> None:
        """Cheap enough for every wait. A guard that is gone is told once, as BenchError: the run then ends safely."""
        now_s = time.monotonic()
        if self._over or now_s - self._beaten_s < self._every_s:
            return
        self._beaten_s = now_s
        if not self.alive or not self._say(BEAT):
            self._over = True
            raise BenchError(
                "The guard process is gone, so nobody would make the bench safe if this program died. "
                "The bench is made safe now; start the run again."
            )

    def done(self) -> None:
        """The orderly end: the guard leaves without doing anything."""
        self._leave(DONE)

    def take_over(self) -> None:
        """The runner could not confirm the safe state: the guard tries over links of its own, then leaves."""
        self._leave(TAKE_OVER)

    def _leave(self, last_word: str) -> None:
        self._over = True
        self._say(last_word)
        for pipe in (self._process.stdin, self._process.stdout):
            with suppress(OSError):
                if pipe is not None:
                    pipe.close()
        try:
            self._process.wait(_END_S)
        except subprocess.TimeoutExpired:
            self._process.kill()
            self._process.wait()

    def _say(self, line: str) -> bool:
        try:
            assert self._process.stdin is not None
            self._process.stdin.write(line + "\n")
            self._process.stdin.flush()
        except (OSError, ValueError):
            return False
        return True


def _surroundings() -> dict[str, str]:
    """The guard must find this very program, also in a checkout that is not installed."""
    source = str(Path(shipped.__file__).resolve().parents[1])
    found = dict(os.environ)
    found["PYTHONPATH"] = os.pathsep.join(filter(None, (source, found.get("PYTHONPATH"))))
    return found
