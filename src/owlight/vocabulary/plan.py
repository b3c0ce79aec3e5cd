"""What is to be measured, resolved: settled values only, ready to be stored before the first light."""

from __future__ import annotations

from dataclasses import dataclass, field

from owlight.quantity import words
from owlight.vocabulary.terms import RECEIVED_POWER, TERMS
from owlight.vocabulary.values import Setting, Term, Value


@dataclass(frozen=True)
class Source:
    """A text that decides what happens, whole. `kind`: sequence, bench, driver, world, instrument, chain."""

    kind: str
    name: str
    text: str
    sha256: str


@dataclass(frozen=True)
class Measurand:
    """No sensitivity without it. `power` is the power convention in words."""

    reference_plane: str
    power: str
    threshold_name: str
    threshold_ber: float


@dataclass(frozen=True)
class Signal:
    """`tributary_offsets` are bits of delay into one pattern period, one a lane (XI, XQ, YI, YQ)."""

    modulation: str
    symbol_rate_bd: float
    polarisations: int
    pulse_shape: str
    rolloff: float
    pattern_order: int
    tributary_offsets: tuple[int, ...]


@dataclass(frozen=True)
class CaptureRequest:
    """`symbols` is the least to be captured a lane; `vertical` is "fixed" or "follow"; `keep` what raw data stay."""

    symbols: int
    sample_rate_hz: float
    record_length: int
    lanes: tuple[str, ...]
    vertical: str
    keep: str


@dataclass(frozen=True)
class StopRule:
    """Per point, whichever comes first; `errors` and `bits` cap a point, `passes` ends the run."""

    passes: int
    captures_per_stay: int
    errors: int | None = None
    bits: int | None = None


@dataclass(frozen=True)
class Condition:
    """Wait until the reading's slope, at the stated settings, is below the limit; time-out fails."""

    reading: Term
    at: tuple[Setting, ...]
    drifts_less_than: float
    over_s: float
    at_most_s: float


@dataclass(frozen=True)
class Point:
    """One combination of sweep settings, outermost first."""

    index: int
    settings: tuple[Setting, ...]
    reference: bool = False

    def value(self, term: Term) -> Value | None:
        return next((setting.value for setting in self.settings if setting.term == term), None)

    @property
    def group(self) -> str:
        """The curve it belongs to: the settings of all axes but received power, in words; "" if there are none."""
        return ", ".join(_in_words(s) for s in self.settings if s.term != RECEIVED_POWER)


def _in_words(setting: Setting) -> str:
    if isinstance(setting.value, float):
        return f"{setting.term} {words(setting.value, TERMS[setting.term].unit)}"
    return f"{setting.term} {setting.value}"


@dataclass(frozen=True)
class Attempt:
    """One stay at a point. `number` counts stays at that point; the captures are fixed before the stay."""

    point: Point
    number: int
    captures: int
    reason: str
    """pass, retry, remeasure, reference or search."""
    planned_time_s: float


@dataclass(frozen=True)
class PlanePower:
    """The highest power that could reach a plane in the worst case, beside its limit."""

    plane: str
    situation: str
    power_dbm: float
    limit_dbm: float
    point: int | None


@dataclass(frozen=True)
class SafeStep:
    """One step towards the safe state, executable without any file: what the guard is given.

    `settled_query` asks the register whose `settled_bit` falls once the change is over; empty where nothing shows it.
    """

    role: str
    resource: str
    serial_number: str
    command: str
    query: str
    expected: Value
    tolerance: float | None
    words: str = ""
    settled_query: str = ""
    settled_bit: int = 0


@dataclass(frozen=True)
class ChainText:
    """A demodulation chain as canonical text; its hash is stored with each result."""

    name: str
    text: str
    sha256: str


@dataclass(frozen=True)
class Plan:
    """A sequence expanded against a bench. `order` holds point indices of each pass, reference stays included."""

    name: str
    sources: tuple[Source, ...]
    seed: int
    simulated: bool
    measurand: Measurand | None
    signal: Signal | None
    settings: tuple[Setting, ...]
    conditions: tuple[Condition, ...]
    points: tuple[Point, ...]
    order: tuple[tuple[int, ...], ...]
    readings: tuple[Term, ...]
    capture: CaptureRequest | None
    chain: ChainText | None
    stop: StopRule
    highest_power: tuple[PlanePower, ...]
    stay_s: float
    forecast_s: float
    forecast_bytes: int
    safe_state: tuple[SafeStep, ...] = field(default=())
