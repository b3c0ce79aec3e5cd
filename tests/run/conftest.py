"""A bench that exists only as a list of what was asked of it."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np
import pytest

from owlight.bench import Bench, LightState
from owlight.clock import ManualClock
from owlight.errors import BenchError
from owlight.instrument.steering import ReceivedPowerSet
from owlight.jobs.planning import plan_of
from owlight.jobs.resolve import Resolved, resolve
from owlight.link import Stamper
from owlight.run.attended import AttendedClock, StopRequests
from owlight.run.night import Night
from owlight.vocabulary.captures import Capture, CaptureId, Demodulation, Lane, Tributary
from owlight.vocabulary.events import AttemptFinished, Event, SafeState, SafeStepOutcome
from owlight.vocabulary.plan import CaptureRequest, Plan
from owlight.vocabulary.values import Reading, Setting, Term

TAP_W = 1e-6


@dataclass
class ListedBench:
    """Answers everything at once; `spoil` may raise at any call, `stale` repeats the last record."""

    paper: Bench
    clock: AttendedClock
    calls: list[tuple[object, ...]] = field(default_factory=list)
    spoil: Callable[[tuple[object, ...]], None] = lambda call: None
    stale: bool = False
    roles: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        self.stamper = Stamper(self.clock)
        self.roles = tuple(self.paper.role)
        self._made = 0

    def _note(self, *call: object) -> None:
        self.calls.append(call)
        self.spoil(call)

    def set(self, term: Term, value: object) -> None:
        self._note("set", str(term), value)

    def set_wavelength(self, signal_nm: float | None, lo_nm: float | None = None) -> None:
        self._note("wavelength", signal_nm, lo_nm)

    def confirm(self, setting: Setting) -> None:
        self._note("confirm", str(setting.term), setting.value)

    def zero_meter(self) -> None:
        self._note("zero")

    def light_up(self, wanted: LightState) -> None:
        self._note("light", wanted)

    def set_received_power(self, received_power_dbm: float) -> ReceivedPowerSet:
        self._note("received power", received_power_dbm)
        return ReceivedPowerSet(20.0, 20.0)

    def read(self, term: Term, count: int = 1, phase: str = "") -> Reading:
        self._note("read", str(term), phase)
        return Reading(self.stamper.stamp(), term, TAP_W, 1e-10, count, phase)

    def capture(self, identifier: CaptureId, seed: int, planned_time_s: float, request: CaptureRequest) -> Capture:
        self._note("capture", identifier.point, identifier.attempt, identifier.number)
        self._made += 0 if self.stale else 1
        # 30 codes rms fill the first range of the vertical search, so that it is kept
        noise = np.random.default_rng(self._made).normal(0, 30, (4, 2000)).astype(np.int8)
        lanes = tuple(
            Lane(name, codes, 0.4 / 256, 0.0, 0.0, hashlib.sha256(codes.tobytes()).hexdigest())
            for name, codes in zip(request.lanes, noise, strict=True)
        )
        return Capture(identifier, self.stamper.stamp(), 80e9, lanes, seed, planned_time_s)

    def make_safe(self) -> SafeState:
        self.calls.append(("safe",))
        return SafeState(self.stamper.stamp(), True, (SafeStepOutcome("attenuator", "to 60 dB", "60", True),))


@dataclass(frozen=True)
class Later:
    capture: Capture
    asked: list[CaptureId]

    def result(self) -> Demodulation:
        self.asked.append(self.capture.id)
        tributaries = tuple(Tributary(name, 10_000, 40, 9.0) for name in ("XI", "XQ", "YI", "YQ"))
        return Demodulation(self.capture.id, "0" * 64, "locked", "", tributaries, 9.0, 30.0, 1.9, (), 0.01)


@dataclass
class Rig:
    """A night on a listed bench, all its events kept."""

    night: Night
    bench: ListedBench
    events: list[Event]
    stop: StopRequests
    demodulated: list[CaptureId]

    def stays(self) -> list[AttemptFinished]:
        return [event for event in self.events if isinstance(event, AttemptFinished)]

    def names(self) -> list[str]:
        return [type(event).__name__ for event in self.events]


@pytest.fixture(scope="session")
def resolved() -> Resolved:
    return resolve("qpsk_sensitivity", "bench")


@pytest.fixture(scope="session")
def plan(resolved: Resolved) -> Plan:
    """Four powers, two passes, short records, no warm-up and no reference."""
    made = plan_of(resolved)
    assert made.capture is not None
    chosen = tuple(replace(point, index=place) for place, point in enumerate(made.points[:4]))
    request = replace(made.capture, record_length=2000)
    return replace(made, points=chosen, order=((2, 0, 3, 1), (1, 3, 0, 2)), capture=request, conditions=())


@pytest.fixture
def rig(plan: Plan, resolved: Resolved) -> Rig:
    stop = StopRequests()
    clock = AttendedClock(ManualClock(), stop, lambda: None, real_time=False)
    bench = ListedBench(resolved.bench, clock)
    events: list[Event] = []
    asked: list[CaptureId] = []
    night = Night(
        plan=plan,
        bench=bench,  # type: ignore[arg-type]
        emit=events.append,
        clock=clock,
        stamper=bench.stamper,
        stop=stop,
        demodulate_later=lambda capture: Later(capture, asked),
    )
    return Rig(night, bench, events, stop, asked)


@pytest.fixture
def fail_at() -> Callable[[str, int], Callable[[tuple[object, ...]], None]]:
    """Raises at the n-th call of a name."""

    def make(name: str, number: int, trouble: BaseException | None = None) -> Callable[[tuple[object, ...]], None]:
        seen = [0]

        def spoil(call: tuple[object, ...]) -> None:
            seen[0] += call[0] == name
            if call[0] == name and seen[0] == number:
                raise trouble or BenchError("The cable fell out. Put it back.")

        return spoil

    return make
