"""The verb `run`: plan, logbook, guard, open bench, loop, conclusion - put together here and nowhere else."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from owlight.errors import BenchError, InUseError, StopNow, StorageError
from owlight.guard import Guard
from owlight.instrument.open_bench import Access, open_bench
from owlight.instrument.safe_state import reach_safe_state
from owlight.jobs.bench_session import Surroundings, surroundings
from owlight.jobs.conclude import conclude
from owlight.jobs.planning import plan_of
from owlight.jobs.resolve import Resolved
from owlight.jobs.software import provenance
from owlight.link import Stamper
from owlight.logbook import Logbook, RunWriter
from owlight.plan import longest_unattended_s
from owlight.run.attended import AttendedClock, StopRequests
from owlight.run.night import Night
from owlight.run.runner import Outcome, run
from owlight.run.waiting import Demodulator
from owlight.vocabulary.captures import Capture
from owlight.vocabulary.events import Emit, Event, Note, SafeState, SegmentEnded, SegmentStarted
from owlight.vocabulary.plan import Plan

GUARD_SILENCE_S = 60.0
"""Longer than any single exchange's own deadline, shorter than a person would leave light unattended."""

Show = Callable[[Plan, Event], None]


@dataclass(frozen=True)
class Order:
    """What is asked of one run, beside the resolved files."""

    folder: Path
    world: Path | None
    command_line: str
    seed: int | None = None
    reproduces: str | None = None
    say: Callable[[str], None] = lambda words: None
    show: Show = lambda plan, event: None


@dataclass(frozen=True)
class Measured:
    run_id: str
    outcome: Outcome


def measure(resolved: Resolved, order: Order) -> Measured:
    """Measure a whole sequence. Files and limits are judged before anything is opened or written."""
    plan_of(resolved, seed=order.seed)
    stop = StopRequests(say=order.say)
    with stop.on_signals(), surroundings(resolved.bench, order.world) as around:
        plan = plan_of(resolved, around.resources, order.seed)
        with Logbook.open(order.folder) as logbook:
            writer = logbook.start_run(plan, provenance(order.command_line, order.reproduces))
            try:
                outcome = _night(resolved, plan, order, around, stop, writer)
                writer.conclude(conclude(plan, order.folder, writer.run_id, resolved.bench))
            finally:
                writer.close()
    return Measured(writer.run_id, outcome)


def _night(
    resolved: Resolved, plan: Plan, order: Order, around: Surroundings, stop: StopRequests, writer: RunWriter
) -> Outcome:
    log = order.folder / "guard.jsonl"
    guard = Guard.start(plan.safe_state, silence_s=GUARD_SILENCE_S, log=log, end_after_s=_longest_s(resolved))
    clock = AttendedClock(around.clock, stop, guard.beat, around.real_time)
    demodulator = (
        Demodulator(plan.chain, clock.checkpoint) if plan.chain is not None and plan.capture is not None else None
    )
    stamper = Stamper(clock)
    emit = _emitter(plan, order, writer)
    confirmed = False
    try:
        try:
            bench = open_bench(resolved.bench, resolved.drivers, Access(around.resources, clock.beat), emit, clock)
        except (BenchError, StopNow) as trouble:
            confirmed = True  # nothing was set here, so there is nothing for the guard to do
            clock.only_beat()
            return _not_opened(plan, stamper, emit, trouble, clock)
        with bench:
            night = Night(
                plan=plan,
                bench=bench,
                emit=emit,
                clock=clock,
                stamper=bench.stamper,
                stop=stop,
                demodulate_later=demodulator.later if demodulator else None,
                announce=around.announce,
            )
            outcome = run(night)
            confirmed = outcome.safe_state is not None and outcome.safe_state.confirmed
            return outcome
    finally:
        if confirmed:
            guard.done()
        else:
            guard.take_over()
        if demodulator:
            demodulator.close(at_once=stop.level >= 2)


def _longest_s(resolved: Resolved) -> float | None:
    return None if resolved.sequence is None else longest_unattended_s(resolved.bench, resolved.sequence)


def _not_opened(
    plan: Plan, stamper: Stamper, emit: Emit, trouble: BenchError | StopNow, clock: AttendedClock
) -> Outcome:
    """This run set nothing, but light of a previous user may be on: what can be reached is made safe, unless another
    run is measuring with it."""
    stopped = isinstance(trouble, StopNow)
    state, reason = ("called off", "stopped by a person") if stopped else ("gave up", str(trouble))
    emit(SegmentStarted(stamper.stamp(), 1, "started"))
    if not stopped:
        emit(Note(stamper.stamp(), "fault", reason, getattr(trouble, "role", "")))
    safe = None
    if not isinstance(trouble, InUseError):
        safe = reach_safe_state(plan.safe_state, emit, clock, stamper=stamper)
        emit(safe)
    emit(SegmentEnded(stamper.stamp(), state, reason))
    return Outcome(state, reason, safe)


def _emitter(plan: Plan, order: Order, writer: RunWriter) -> Emit:
    """Durable first, then shown; what storage refuses goes to the side file and the screen, so that it is not lost."""

    def emit(event: Event) -> None:
        try:
            writer.record(event)
        except StorageError:
            _last_words(order, event)
            if isinstance(event, SafeState):
                order.show(plan, event)
            raise
        order.show(plan, event)

    return emit


def _last_words(order: Order, event: Event) -> None:
    if isinstance(event, Capture):
        return
    line = json.dumps({type(event).__name__: repr(event)})
    place = order.folder / "last_words.jsonl"
    try:
        with place.open("a", encoding="utf-8") as side:
            side.write(line + "\n")
    except OSError:
        order.say(f"not stored: {line}")  # the disk that refused the logbook refuses this too
    else:
        order.say(f"The logbook refused {type(event).__name__}; it is kept in {place}.")
