"""The bench, open: every instrument proven and locked, every setting judged against the damage limits first."""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from types import TracebackType

import numpy as np

from owlight import shipped
from owlight.bench import Bench, LightState, as_it_shines, lo_laser_power_dbm
from owlight.clock import Clock
from owlight.driver import Driver
from owlight.errors import BenchError, InstrumentError
from owlight.instrument import light_keeper, lighting, steering
from owlight.instrument.instrument import Instrument
from owlight.instrument.light_keeper import FIELDS, LightKeeper
from owlight.instrument.lock import SerialLock
from owlight.instrument.record import LaneRecord
from owlight.instrument.safe_state import STEP_S, take_step
from owlight.instrument.steering import ReceivedPowerSet
from owlight.link import Link, Opener, Stamper, open_visa
from owlight.plan import safe_steps
from owlight.scpi import may_be, tells_serial
from owlight.vocabulary.captures import Capture, CaptureId, Lane
from owlight.vocabulary.events import Emit, Event, Note, SafeState, SafeStepOutcome
from owlight.vocabulary.plan import CaptureRequest, SafeStep
from owlight.vocabulary.terms import LO_POWER
from owlight.vocabulary.values import Applied, Identity, Reading, Setting, Term, Value

_SAMPLE_RATE = Term("oscilloscope", "sample_rate")
_BY_ACTION = (lighting.SIGNAL_WAVELENGTH, lighting.LO_WAVELENGTH)


@dataclass(frozen=True)
class Access:
    """How the instruments of a bench are reached: addresses by role, what opens one, what is called while waiting."""

    resources: Mapping[str, str]
    beat: Callable[[], None] = lambda: None
    opener: Opener = open_visa
    lock_folder: Path | None = None


class OpenBench:
    """`paper` is the bench file; `light` is what read-backs have proven, None where nothing has."""

    def __init__(self, bench: Bench, drivers: Mapping[str, Driver], access: Access, emit: Emit, clock: Clock) -> None:
        self.paper = bench
        self.clock = clock
        self.roles = tuple(bench.role)
        self.stamper = Stamper(clock)
        self.identities: tuple[Identity, ...] = ()
        self._emit_event = emit
        self._beat = access.beat
        self._opener = access.opener
        self._keeper = LightKeeper(bench)
        self._stands: dict[Term, Value] = {}
        self._locks: list[SerialLock] = []
        self._dark_before_all = False
        self._touched = False
        self._attenuator_trusted = True
        self._steps = safe_steps(bench, drivers, access.resources)
        self._instruments = {
            role: Instrument(
                role, drivers[role], self._link(role, access.resources[role]), self.emit, self.stamper, clock
            )
            for role in self.roles
        }

    def _link(self, role: str, resource: str) -> Link:
        return Link(role, resource, self.emit, self.clock, self._opener, self._beat, self.stamper)

    @property
    def light(self) -> LightState:
        return self._keeper.state

    def emit(self, event: Event) -> None:
        """While the bench is made safe, a logbook that fails must not stop it."""
        try:
            self._emit_event(event)
        except Exception:
            if not self._dark_before_all:
                raise

    def open(self, lock_folder: Path) -> None:
        """Prove and lock every instrument, then look how the light stands; nothing is set."""
        held: dict[str, str] = {}
        for role, instrument in self._instruments.items():
            instrument.link.open()
            identity = instrument.identify()
            self._prove(identity)
            lasting = identity.serial_number if tells_serial(identity.serial_number) else identity.resource
            # one laser may serve as signal and local oscillator; a bench that is simulated for this run is ours alone
            if lasting not in held and not self.paper.role[role].resource.startswith("simulated "):
                held[lasting] = role
                self._lock(lock_folder, lasting, identity)
            instrument.take_over()
            self.identities += (identity,)
            self.emit(identity)
        for term in FIELDS:
            if term.role in self._instruments:
                self._keeper.learn(term, self._instruments[term.role].read_setting(term))

    def _prove(self, found: Identity) -> None:
        planned = self.paper.role[found.role].serial_number
        if not tells_serial(found.serial_number):
            words = f"{found.role} does not tell its serial number; that it is {planned} rests on the bench file alone."
            self.emit(Note(self.stamper.stamp(), "warning", words, found.role))
        elif not may_be(found.serial_number, planned):
            raise InstrumentError(
                f"As {found.role} the bench file expects serial number {planned}, but {found.maker} {found.model} with "
                f"serial number {found.serial_number} answers at {found.resource}. Nothing was set; "
                "correct the bench file or the address.",
                found.role,
            )

    def _lock(self, folder: Path, lasting: str, identity: Identity) -> None:
        lock = SerialLock(folder, lasting, identity.resource, identity.at.utc)
        self._locks.append(lock)
        if lock.stale:
            words = f"The lock of {lasting} was left behind by {lock.stale}; that process is gone, so it is taken over."
            self.emit(Note(self.stamper.stamp(), "warning", words, identity.role))

    def set(self, term: Term, value: Value, point: int | None = None) -> Applied:
        """Judge, set, prove. The local oscillator's power at the receiver is turned into that of its laser.

        Attenuation comes before power: where a source gives more the attenuator is closed first and stays so, and an
        attenuator opens in small steps with a look at the tap.
        """
        if term == LO_POWER:
            return self.set_lo_power(float(value), point)
        if term in _BY_ACTION and self._could_be_lit(term.role):
            raise BenchError(
                f"{term} changes only in the dark, and the {term.role} is not proven to be off. "
                "Nothing was set; change it by set_wavelength."
            )
        tolerance = self.tolerance_of(term)
        if not self._keeper.brightens(term, value, tolerance):
            return self.set_at_once(term, value, point)
        if term == light_keeper.ATTENUATION:
            return steering.approach(self, float(value), point)
        self._keeper.judge(term, value, point, closed=self.knows(light_keeper.ATTENUATION))
        steering.close_attenuator(self)
        return self.set_at_once(term, value, point)

    def _could_be_lit(self, role: str) -> bool:
        shines = as_it_shines(self.paper, self.light)
        return (shines.signal_on if role == "signal_laser" else shines.lo_on) is not False

    def judge(self, term: Term, value: Value, point: int | None = None) -> None:
        self._keeper.judge(term, value, point)

    def set_at_once(self, term: Term, value: Value, point: int | None = None) -> Applied:
        """One judged command. Whoever calls it has seen to the order of attenuation and power."""
        instrument = self._instrument(term)
        self._keeper.judge(term, value, point)
        self._touched = True
        self._keeper.forget(term)
        self._stands.pop(term, None)
        applied = instrument.set(term, value)
        assert applied.read_back is not None
        self._keeper.learn(term, applied.read_back)
        self._stands[term] = applied.read_back
        return applied

    def read(self, term: Term, count: int = 1, phase: str = "") -> Reading:
        return self._instrument(term).read(term, count, phase)

    def read_setting(self, term: Term) -> Value | None:
        """How a setting stands now, asked of the instrument."""
        found = self._instrument(term).read_setting(term)
        self._keeper.learn(term, found)
        return found

    def confirm(self, setting: Setting) -> None:
        """InstrumentError where a setting no longer stands as it was asked for."""
        term, value = setting.term, setting.value
        if term == LO_POWER:
            term, value = light_keeper.LO_POWER, lo_laser_power_dbm(self.paper, float(value))
        self._keeper.learn(term, self._instrument(term).confirm(term, value))

    def distrust_attenuator(self) -> None:
        """It is not where it was left: darkness now begins with the sources."""
        self._attenuator_trusted = False

    def act(self, term: Term) -> None:
        if term == lighting.ZERO:
            self.zero_meter()
        else:
            self._instrument(term).act(term)

    def act_plainly(self, term: Term) -> None:
        self._instrument(term).act(term)

    def knows(self, term: Term) -> bool:
        return term.role in self._instruments and self._instruments[term.role].driver.knows(term)

    def tolerance_of(self, term: Term) -> float:
        return self._instrument(term).driver.tolerance_of(term) or 0.0

    def stands(self, term: Term) -> Value | None:
        """The last read-back of a setting, asked for if it was never set."""
        if term not in self._stands:
            found = self._instrument(term).read_setting(term)
            if found is None:
                return None
            self._stands[term] = found
        return self._stands[term]

    def was_set(self, term: Term, value: float) -> bool:
        """Whether it was set here, and read back at this value."""
        stands = self._stands.get(term)
        return isinstance(stands, float) and abs(stands - value) <= self.tolerance_of(term) * (1 + 1e-9)

    def _instrument(self, term: Term) -> Instrument:
        if term.role not in self._instruments:
            raise BenchError(f"The bench has no {term.role}, so {term} does not exist. Add the role to the bench file.")
        return self._instruments[term.role]

    def zero_meter(self) -> None:
        lighting.zero_meter(self)

    def set_wavelength(self, signal_nm: float | None, lo_nm: float | None = None) -> None:
        """One action in the dark; meter and attenuator follow the signal. None leaves a wavelength as it stands."""
        lighting.set_wavelength(self, signal_nm, lo_nm)

    def light_up(self, wanted: LightState) -> None:
        """Bias, attenuator maximum, local oscillator, signal: the sources that are wanted on, and no other.

        Powers are those of the lasers, None leaves one as it stands; the attenuator stays at its maximum.
        """
        lighting.light_up(self, wanted)

    def set_lo_power(self, lo_power_dbm: float, point: int | None = None) -> Applied:
        return self.set(light_keeper.LO_POWER, lo_laser_power_dbm(self.paper, lo_power_dbm), point)

    def set_received_power(self, received_power_dbm: float) -> ReceivedPowerSet:
        return steering.set_received_power(self, received_power_dbm)

    def capture(self, identifier: CaptureId, seed: int, planned_time_s: float, request: CaptureRequest) -> Capture:
        """One record of the lanes asked for; a short or silent one comes back as it is, with its hash."""
        channel_of: dict[str, int] = {lane.name: lane.channel for lane in self.paper.receiver.lane}
        channels = tuple(channel_of[name] for name in request.lanes)
        scope = self._instrument(_SAMPLE_RATE)
        ranges_v = {channel: self._range_v(channel) for channel in channels}
        sample_rate_hz = self.stands(_SAMPLE_RATE)
        if not isinstance(sample_rate_hz, float):
            raise InstrumentError("The oscilloscope does not tell its sample rate. Look at it.", scope.role)
        records = scope.record(channels, request.record_length, ranges_v)
        return Capture(
            id=identifier,
            at=self.stamper.stamp(),
            sample_rate_hz=sample_rate_hz,
            lanes=tuple(_lane(name, record, scope.driver) for name, record in zip(request.lanes, records, strict=True)),
            seed=seed,
            planned_time_s=planned_time_s,
        )

    def _range_v(self, channel: int) -> float:
        found = self.stands(Term("oscilloscope", f"range_{channel}"))
        return float(found) if isinstance(found, float) else float("nan")

    def make_safe(self) -> SafeState:
        """Attenuator maximum, signal off, local oscillator off; each on its own, each confirmed or said not to be.

        An attenuator that cannot be trusted comes last: it may stand open, and the sources must not wait for it.
        """
        self._dark_before_all = True
        outcomes = tuple(self._safe_step(step) for step in self._steps_in_order())
        self._dark_before_all = False
        confirmed = all(outcome.confirmed for outcome in outcomes)
        self._touched = self._touched and not confirmed  # closing tries again what is not confirmed
        self._attenuator_trusted = self._attenuator_trusted or confirmed
        return SafeState(self.stamper.stamp(), confirmed, outcomes)

    def _steps_in_order(self) -> list[SafeStep]:
        attenuator = self._instruments.get("attenuator")
        proven = self._attenuator_trusted and self.light.attenuation_db is not None
        if attenuator is None or (attenuator.link.healthy and proven):
            return list(self._steps)
        return sorted(self._steps, key=lambda step: step.role == "attenuator")

    def _safe_step(self, step: SafeStep) -> SafeStepOutcome:
        """Half the time over the link in use, then half over a fresh one."""
        instrument = self._instruments[step.role]
        outcome = None
        if instrument.link.healthy:
            outcome = take_step(step, instrument.link, self.clock, STEP_S / 2)
        if outcome is None or not outcome.confirmed:
            instrument.link.close()
            fresh = self._link(step.role, step.resource)
            outcome = take_step(step, fresh, self.clock, STEP_S / 2)
            fresh.close()
        setting = Term(step.role, "attenuation" if step.role == "attenuator" else "output")
        self._stands.pop(setting, None)
        value = self.paper.light_path.attenuator_maximum_db if step.role == "attenuator" else False
        self._keeper.learn(setting, value if outcome.confirmed else None)
        return outcome

    def close(self) -> None:
        """Close every link and give the locks back. Light that could still be on is turned off first."""
        if self._touched:
            self.make_safe()
        for instrument in self._instruments.values():
            instrument.link.close()
        while self._locks:
            self._locks.pop().release()

    def __enter__(self) -> OpenBench:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, trouble: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()


def _lane(name: str, record: LaneRecord, driver: Driver) -> Lane:
    assert driver.record is not None
    codes = record.codes
    clipped = (codes <= driver.record.lowest_code) | (codes >= driver.record.highest_code)
    return Lane(
        name=name,
        codes=codes,
        volts_per_code=record.volts_per_code,
        offset_v=record.offset_v,
        clipped_fraction=float(np.mean(clipped)) if codes.size else 0.0,
        sha256=hashlib.sha256(codes.astype(codes.dtype.newbyteorder("<"), copy=False).tobytes()).hexdigest(),
    )


def open_bench(bench: Bench, drivers: Mapping[str, Driver], access: Access, emit: Emit, clock: Clock) -> OpenBench:
    """Open, prove and lock all instruments of the bench, or none: BenchError, and nothing was set."""
    opened = OpenBench(bench, drivers, access, emit, clock)
    try:
        opened.open(access.lock_folder or shipped.user_cache() / "locks")
    except BaseException:
        opened.close()
        raise
    return opened
