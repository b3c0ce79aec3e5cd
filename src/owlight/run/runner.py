"""The loop. One thread owns bench, logbook and screen; the safe state comes first on every way out."""

from __future__ import annotations

from collections import deque
from dataclasses import dataclass

from owlight.errors import BenchError, StopNow
from owlight.plan import next_attempt
from owlight.run.night import Night
from owlight.run.prepare import prepare
from owlight.run.stay import Stay, stay_at
from owlight.vocabulary.events import AttemptFinished, History, Note, SafeState, SegmentEnded, SegmentStarted

LAG = 1
"""How many stays may wait for their demodulation when the next is chosen; the planner never looks at that many."""
MOST_FAILED_IN_A_ROW = 3


@dataclass(frozen=True)
class Outcome:
    """How the segment ended: `state` is finished, called off or gave up."""

    state: str
    reason: str
    safe_state: SafeState | None


class _TooManyFailuresError(BenchError):
    """Too many stays in a row gave nothing."""


def run(night: Night, history: History = (), segment: int = 1) -> Outcome:
    """Measure until the plan has no next attempt, a person stops it, or the bench fails.

    Every event is durable before the next step. Raises only what storage raises, after the bench was made safe.
    """
    night.emit(SegmentStarted(night.stamper.stamp(), segment, "resumed" if history else "started"))
    waiting: deque[Stay] = deque()
    state, reason, collect = "gave up", "an unexpected fault", True
    try:
        prepare(night)
        done = _measure(night, list(history), waiting)
        state, reason = ("finished", "every planned stay was taken") if done else ("called off", "stopped by a person")
    except StopNow:
        state, reason, collect = "called off", "stopped at once by a person", False
    except BenchError as trouble:
        reason = str(trouble)
        night.emit(Note(night.stamper.stamp(), "fault", reason, getattr(trouble, "role", "")))
    finally:
        safe = _end(night, waiting if collect else deque(), state, reason)
    return Outcome(state, reason, safe)


def _measure(night: Night, history: list[AttemptFinished], waiting: deque[Stay]) -> bool:
    """True when the plan is exhausted, False when a person asked to stop after the point in hand."""
    failed_in_a_row = 0
    while night.stop.level == 0:
        while len(waiting) > LAG:
            finished = _collect(night, waiting)
            history.append(finished)
            failed_in_a_row = failed_in_a_row + 1 if finished.outcome == "failed" else 0
            if failed_in_a_row >= MOST_FAILED_IN_A_ROW:
                raise _TooManyFailuresError(
                    f"{failed_in_a_row} stays in a row failed, the last because: {finished.reason}"
                )
        known = (*history, *(stay.placeholder() for stay in waiting))
        attempt = next_attempt(night.plan, known)
        if attempt is None and waiting:
            history.append(_collect(night, waiting))
            continue
        if attempt is None:
            return True
        stay = Stay(attempt, night.stamper.stamp())
        try:
            stay_at(night, stay)
        except BenchError as trouble:
            _drain(night, waiting)
            night.emit(stay.failed(night.stamper.stamp(), str(trouble)))
            raise
        waiting.append(stay)
    return False


def _collect(night: Night, waiting: deque[Stay]) -> AttemptFinished:
    """Emitted before it leaves the queue, so a stay that could not be stored is not forgotten."""
    finished = waiting[0].finished(night)
    night.emit(finished)
    waiting.popleft()
    return finished


def _drain(night: Night, waiting: deque[Stay]) -> None:
    while waiting:
        _collect(night, waiting)


def _end(night: Night, waiting: deque[Stay], state: str, reason: str) -> SafeState:
    """Safe state first, then what still waits for its demodulation, then the record of both."""
    night.clock.only_beat()
    safe = night.bench.make_safe()
    try:
        _drain(night, waiting)
    except BenchError as trouble:
        night.emit(Note(night.stamper.stamp(), "fault", str(trouble)))
    night.emit(safe)
    night.emit(SegmentEnded(night.stamper.stamp(), state, reason))
    return safe
