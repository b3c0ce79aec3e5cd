"""The guard's side: wait for silence, for the end of the pipe or of the time; then end the runner and make it dark."""

from __future__ import annotations

import json
import os
import queue
import signal
import sys
import threading
import time
from dataclasses import asdict
from pathlib import Path

from owlight.clock import WallClock
from owlight.guard.orders import DONE, READY, TAKE_OVER, Orders
from owlight.instrument.safe_state import reach_safe_state
from owlight.vocabulary.events import Event, SafeState

_TERMINATE_S = 6.0
"""Three steps of two seconds: what a healthy runner needs to make its own bench safe."""
_KILL_S = 2.0
_LOOK_S = 0.02
_GONE = ""
_UNCONFIRMED = "the runner could not confirm the safe state"

Lines = queue.SimpleQueue[str]


def main() -> int:
    """0 after an orderly end, 1 after the bench had to be made safe here."""
    for name in ("SIGINT", "SIGHUP"):
        if hasattr(signal, name):
            signal.signal(getattr(signal, name), signal.SIG_IGN)
    orders = Orders.from_line(sys.stdin.readline())
    lines: Lines = queue.SimpleQueue()
    # a thread, since Windows cannot wait for a pipe with a time-out
    threading.Thread(target=_listen, args=(lines,), daemon=True).start()
    signal.signal(signal.SIGTERM, lambda *_: lines.put(_GONE))
    print(READY, flush=True)
    reason = _watch(orders, lines)
    if not reason:
        return 0
    how = "" if reason == _UNCONFIRMED else _end_runner(orders.runner_pid, lines)
    if how == DONE:
        _append(orders, f"{reason}; it was asked to end and did so in order", None)
        return 0
    safe = reach_safe_state(orders.steps, _unheard, WallClock())
    _append(orders, "; ".join(filter(None, (reason, how))), safe)
    return 1


def _listen(lines: Lines) -> None:
    for line in sys.stdin:
        lines.put(line.strip())
    lines.put(_GONE)


def _unheard(event: Event) -> None:
    """No logbook here: what matters stands in the guard's own file."""


def _watch(orders: Orders, lines: Lines) -> str:
    """Why the guard must act, or nothing after an orderly end."""
    began_s = time.monotonic()
    while True:
        wait_s = orders.silence_s
        if orders.end_after_s is not None:
            left_s = orders.end_after_s - (time.monotonic() - began_s)
            if left_s <= 0:
                return "the latest end of the run was reached"
            wait_s = min(wait_s, left_s)
        try:
            line = lines.get(timeout=wait_s)
        except queue.Empty:
            if wait_s == orders.silence_s:
                return f"the runner gave no sign of life for {orders.silence_s:g} s"
            continue
        if line == DONE:
            return ""
        if line == TAKE_OVER:
            return _UNCONFIRMED
        if line == _GONE:
            return "the runner ended without saying so"


def _end_runner(pid: int, lines: Lines) -> str:
    """`DONE` if it ended in order, else how it was ended. Only our own parent is ended: a number may be used again."""
    if not _is_parent(pid):
        return "it is no longer there"
    os.kill(pid, signal.SIGTERM)
    if _ends_in_order(pid, lines):
        return DONE
    if not _is_parent(pid):
        return "it is no longer there"
    os.kill(pid, getattr(signal, "SIGKILL", signal.SIGTERM))
    end_s = time.monotonic() + _KILL_S
    while _is_parent(pid) and time.monotonic() < end_s:
        time.sleep(_LOOK_S)
    return "it was ended by force"


def _ends_in_order(pid: int, lines: Lines) -> bool:
    """Whether `done` came while it lived; a dying process closes its pipe a moment before it is gone."""
    end_s = time.monotonic() + _TERMINATE_S
    while _is_parent(pid) and time.monotonic() < end_s:
        try:
            if lines.get(timeout=_LOOK_S) == DONE:
                return True
        except queue.Empty:
            continue
    while not lines.empty():
        if lines.get() == DONE:
            return True
    return False


def _is_parent(pid: int) -> bool:
    return os.getppid() == pid


def _append(orders: Orders, reason: str, safe: SafeState | None) -> None:
    """One line of JSON; the next opener of the logbook takes it in."""
    line = {"utc": WallClock().utc(), "runner_pid": orders.runner_pid, "reason": reason}
    if safe is not None:
        line |= {"confirmed": safe.confirmed, "steps": [asdict(step) for step in safe.steps]}
    path = Path(orders.log)
    path.parent.mkdir(parents=True, exist_ok=True)
    with path.open("a", encoding="utf-8") as file:
        file.write(json.dumps(line) + "\n")
        file.flush()
        os.fsync(file.fileno())
