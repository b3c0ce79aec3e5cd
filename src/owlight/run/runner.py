"""The loop. One thread owns bench, logbook and screen; the safe state comes first on every way out."""

from __future__ import annotations

from collections import deque
from contextlib import ExitStack
from dataclasses import dataclass, field

from owlight.errors import BenchError, SafetyRefusal, StopNow
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
    """How the segment ended: `state` is finished, called off or gave up; `refused`: a limit would be exceeded."""

    state: str
    reason: str
    safe_state: SafeState | None
    refused: bool = False


def run(night: Night, history: History = (), segment: int = 1) -> Outcome:
    """Measure until the plan has no next attempt, a person stops it, or the bench fails.

    Every event is durable before the next step. Raises what storage raises and what nobody foresaw, but only after
    the bench was made safe.
    """
    night.emit(SegmentStarted(night.stamper.stamp(), segment, "resumed" if history else "started"))
    loop = _Loop(list(history))
    state, reason = "gave up", "an unexpected fault"
    try:
        prepare(night)
        done = _measure(night, loop)
        state, reason = ("finished", "every planned stay was taken") if done else ("called off", "stopped by a person")
    except StopNow:
        state, reason = "called off", "stopped at once by a person"
    except (BenchError, SafetyRefusal) as trouble:
        reason = str(trouble)
        loop.trouble = trouble
    finally:
        safe = _end(night, loop, state, reason)
    return Outcome(state, reason, safe, refused=isinstance(loop.trouble, SafetyRefusal))


@dataclass
class _Loop:
    """What the loop knows and has in hand."""

    history: list[AttemptFinished]
    waiting: deque[Stay] = field(default_factory=deque)
    in_hand: Stay | None = None
    trouble: BenchError | SafetyRefusal | None = None


def _measure(night: Night, loop: _Loop) -> bool:
    """True when the plan is exhausted, False when a person asked to stop after the point in hand."""
    failed_in_a_row = 0
    while night.stop.level == 0:
        while len(loop.waiting) > LAG:
            finished = _collect(night, loop.waiting)
            loop.history.append(finished)
            failed_in_a_row = failed_in_a_row + 1 if finished.outcome == "failed" else 0
            if failed_in_a_row >= MOST_FAILED_IN_A_ROW:
                raise BenchError(f"{failed_in_a_row} stays in a row failed, the last because: {finished.reason}")
        known = (*loop.history, *(stay.placeholder() for stay in loop.waiting))
        attempt = next_attempt(night.plan, known)
        if attempt is None and loop.waiting:
            loop.history.append(_collect(night, loop.waiting))
            continue
        if attempt is None:
            return True
        loop.in_hand = Stay(attempt, night.stamper.stamp())
        stay_at(night, loop.in_hand)
        loop.waiting.append(loop.in_hand)
        loop.in_hand = None
    return False


def _collect(night: Night, waiting: deque[Stay]) -> AttemptFinished:
    """Emitted before it leaves the queue, so a stay that could not be stored is not forgotten."""
    finished = waiting[0].finished(night)
    night.emit(finished)
    waiting.popleft()
    return finished


def _end(night: Night, loop: _Loop, state: str, reason: str) -> SafeState:
    """The safe state first, then the record of it and of every stay begun: nothing measured is dropped."""
    night.clock.only_beat()
    safe = night.bench.make_safe()
    # each record is tried, whatever storage says of the others; an exit stack runs its last callback first
    with ExitStack() as records:
        records.callback(lambda: night.emit(SegmentEnded(night.stamper.stamp(), state, reason)))
        if loop.in_hand is not None:
            records.callback(_record_failed, night, loop.in_hand, reason)
        for stay in reversed(loop.waiting):
            records.callback(_record_or_give_up, night, stay)
        if loop.trouble is not None:
            fault = Note(night.stamper.stamp(), "fault", reason, getattr(loop.trouble, "role", ""))
            records.callback(night.emit, fault)
        records.callback(night.emit, safe)
    return safe


def _record_failed(night: Night, stay: Stay, reason: str) -> None:
    night.emit(stay.failed(night.stamper.stamp(), reason))


def _record_or_give_up(night: Night, stay: Stay) -> None:
    """Whoever asked for an end at once is not kept waiting for a demodulation; the capture is kept."""
    if night.stop.level >= 2:
        _record_failed(night, stay, "stopped by a person before its demodulation; its captures are kept")
        return
    try:
        night.emit(stay.finished(night))
    except BenchError as trouble:
        _record_failed(night, stay, str(trouble))
