"""The other end of the control port: moves simulated time, keys the noise, asks for faults."""

from __future__ import annotations

import json
import socket
import threading
from datetime import UTC, datetime, timedelta
from typing import Any

from owlight.clock import iso_utc
from owlight.errors import BenchError

_TIMEOUT_S = 30.0  # a record of the whole bench may be computed meanwhile


class Control:
    """One connection; safe to use from several threads."""

    def __init__(self, port: int) -> None:
        self._socket = socket.create_connection(("127.0.0.1", port), timeout=_TIMEOUT_S)
        self._socket.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        self._lines = self._socket.makefile("rb")
        self._lock = threading.Lock()

    def ask(self, verb: str, **values: object) -> dict[str, Any]:
        """BenchError if the bench refuses or is gone."""
        line = json.dumps({"do": verb, **values}).encode() + b"\n"
        try:
            with self._lock:
                self._socket.sendall(line)
                answer: dict[str, Any] = json.loads(self._lines.readline() or b'{"ok": false, "words": "it is gone"}')
        except OSError as error:
            raise BenchError(f"The simulated bench does not answer: {error}. Start it again.") from error
        if not answer["ok"]:
            raise BenchError(f"The simulated bench refused {verb}: {answer['words']}.")
        return answer

    def advance(self, seconds: float) -> float:
        """Let `seconds` pass; the time now."""
        return float(self.ask("advance", seconds=seconds)["now_s"])

    def now_s(self) -> float:
        return float(self.ask("now")["now_s"])

    def next_capture(self, seed: int, planned_time_s: float) -> None:
        """Key captures and readings from now on."""
        self.ask("next_capture", seed=seed, planned_time_s=planned_time_s)

    def fault(self, role: str, kind: str, count: int = 1, seconds: float = 0.5) -> None:
        """Spoil the next answers of a role: late, missing, half, garbled, drop or stale."""
        self.ask("fault", role=role, kind=kind, count=count, seconds=seconds)

    def truth(self) -> dict[str, Any]:
        """What is true of the bench now; for tests."""
        return self.ask("truth")

    def reset(self) -> None:
        """A new bench: power-up state, no damage, time zero."""
        self.ask("reset")

    def close(self) -> None:
        self._lines.close()
        self._socket.close()


class SteppedClock:
    """The simulated bench's time as a Clock: sleeping moves it, declared latencies do too."""

    def __init__(self, control: Control) -> None:
        self._control = control
        self._began = datetime.now(UTC)

    def utc(self) -> str:
        return iso_utc(self._began + timedelta(seconds=self._control.now_s()))

    def monotonic_s(self) -> float:
        return self._control.now_s()

    def sleep(self, seconds: float) -> None:
        self._control.advance(seconds)
