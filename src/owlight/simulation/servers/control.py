"""The control port: JSON lines by which a runner moves simulated time and tests look behind the scenes."""

from __future__ import annotations

import json
import socket
from collections.abc import Callable, Mapping
from typing import Any

from owlight.simulation.device.instrument import Instrument
from owlight.simulation.light import SharedLight
from owlight.simulation.servers.faults import Faults
from owlight.simulation.servers.listening import Listener


class ControlServer:
    """`{"do": "advance", "seconds": 1}` gives `{"ok": true, ...}` or `{"ok": false, "words": ...}`, one line each."""

    def __init__(self, light: SharedLight, instruments: Mapping[str, Instrument], faults: Mapping[str, Faults]) -> None:
        self._light = light
        self._instruments = instruments
        self._faults = faults
        self._verbs: dict[str, Callable[..., dict[str, Any]]] = {
            "advance": self._advance,
            "next_capture": self._next_capture,
            "fault": self._fault,
            "now": self._now,
            "truth": self._truth,
            "reset": self._reset,
        }
        self.listener = Listener(self._serve)

    def _serve(self, connection: socket.socket) -> None:
        with connection.makefile("rb") as lines:
            for line in lines:
                connection.sendall(json.dumps(self._answer(line)).encode() + b"\n")

    def _answer(self, line: bytes) -> dict[str, Any]:
        try:
            asked = json.loads(line)
            verb = self._verbs[asked.pop("do")]
            with self._light.time.lock:
                return {"ok": True, **verb(**asked)}
        except (ValueError, KeyError, TypeError) as error:
            return {"ok": False, "words": f"{error}; known: {', '.join(self._verbs)}"}

    def let_time_pass(self) -> None:
        with self._light.time.lock:
            if self._light.time.stepped:
                self._light.time.let_pass()

    def _advance(self, seconds: float) -> dict[str, Any]:
        self._light.time.advance(seconds)
        return self._now()

    def _now(self) -> dict[str, Any]:
        return {"now_s": self._light.time.now_s()}

    def _next_capture(self, seed: int, planned_time_s: float) -> dict[str, Any]:
        self._light.next_capture(seed, planned_time_s)
        return {}

    def _fault(self, role: str, kind: str, count: int = 1, seconds: float = 0.5) -> dict[str, Any]:
        self._faults[role].ask(kind, count, seconds)
        return {}

    def _truth(self) -> dict[str, Any]:
        return self._light.truth()

    def _reset(self) -> dict[str, Any]:
        self._light.time.restart()
        for role, instrument in self._instruments.items():
            instrument.power_up()
            self._faults[role].clear()
        self._light.start_again()
        return {}
