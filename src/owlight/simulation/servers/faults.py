"""Faults on demand: what becomes of the next answers of one instrument on their way to the client."""

from __future__ import annotations

import threading
from dataclasses import dataclass

KINDS = ("late", "missing", "half", "garbled", "drop", "stale")


@dataclass
class _Pending:
    kind: str
    count: int
    seconds: float


@dataclass(frozen=True)
class Delivery:
    """What is sent, after how long, and whether the connection is then cut."""

    data: bytes
    wait_s: float = 0.0
    cut: bool = False
    whole: bool = True


class Faults:
    """Those of one instrument, whichever way it is reached. The command has always been executed."""

    def __init__(self) -> None:
        self._lock = threading.Lock()
        self._pending: list[_Pending] = []
        self._last = b""

    def ask(self, kind: str, count: int, seconds: float) -> None:
        """`count` answers from now on; ValueError for an unknown kind."""
        if kind not in KINDS:
            raise ValueError(f"unknown fault {kind!r}; allowed: {', '.join(KINDS)}")
        with self._lock:
            self._pending.append(_Pending(kind, count, seconds))

    def clear(self) -> None:
        with self._lock:
            self._pending.clear()

    def deliver(self, response: bytes) -> Delivery:
        with self._lock:
            before, self._last = self._last, response
            if not self._pending:
                return Delivery(response)
            pending = self._pending[0]
            pending.count -= 1
            if pending.count <= 0:
                self._pending.pop(0)
        return _spoiled(pending, response, before)


def _spoiled(pending: _Pending, response: bytes, before: bytes) -> Delivery:
    if pending.kind == "late":
        return Delivery(response, wait_s=pending.seconds)
    if pending.kind == "half":
        return Delivery(response[: len(response) // 2], whole=False)
    if pending.kind == "garbled":
        return Delivery(bytes(byte ^ 0x15 for byte in response[:-1]) + b"\n")
    if pending.kind == "stale":
        return Delivery(before)
    return Delivery(b"", cut=pending.kind == "drop")
