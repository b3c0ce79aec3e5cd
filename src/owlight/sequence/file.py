"""The tables of a sequence file as they are written. Values that depend on a term are still text here."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Annotated, Any, Literal

from owlight.reader import Within

Order = Literal["as listed", "ascending", "descending", "up-down", "shuffled", "shuffled passes"]


@dataclass(frozen=True)
class ThresholdTable:
    name: str
    ber: Annotated[float | None, Within(1e-15, 0.4)] = None


@dataclass(frozen=True)
class MeasurandTable:
    reference_plane: str
    power: Literal["total average, both polarisations", "total average, one polarisation"]
    threshold: ThresholdTable


@dataclass(frozen=True)
class PulseTable:
    shape: Literal["root raised cosine"]
    rolloff: Annotated[float, Within(0.01, 1.0)]


@dataclass(frozen=True)
class PatternTable:
    """`tributary_offsets` is "spread" or the delays in bits, one a lane."""

    order: Annotated[int, Within(7, 31)]
    tributary_offsets: Literal["spread"] | tuple[int, ...] = "spread"


@dataclass(frozen=True)
class SignalTable:
    modulation: str
    symbol_rate_bd: Annotated[float, Within(1e6, 1e12)]
    polarisations: Literal[1, 2]
    pulse: PulseTable
    pattern: PatternTable


@dataclass(frozen=True)
class ConditionTable:
    reading: str
    drifts_less_than: str
    over_s: Annotated[float, Within(1.0, 86_400.0)]
    at_most_s: Annotated[float, Within(1.0, 86_400.0)]
    at: dict[str, Any] = field(default_factory=dict)


@dataclass(frozen=True)
class BeforeTable:
    wait_until: ConditionTable


@dataclass(frozen=True)
class SweepTable:
    """Either `values`, or `from`, `to` and `step`."""

    setting: str
    values: tuple[Any, ...] | None = None
    from_: Any = None
    to: Any = None
    step: Any = None
    order: Order = "as listed"


@dataclass(frozen=True)
class RecordTable:
    readings: tuple[str, ...] = ()


@dataclass(frozen=True)
class CaptureTable:
    symbols: Annotated[int, Within(1_000, 50_000_000)]
    sample_rate_hz: Annotated[float, Within(1e6, 1e13)]
    vertical: Literal["fixed", "follow"] = "fixed"
    keep: Literal["all", "doubtful", "one per point", "none"] = "all"


@dataclass(frozen=True)
class DemodulationTable:
    chain: Literal["single polarisation", "dual polarisation"]
    stage: dict[str, dict[str, bool | int | float | str]] = field(default_factory=dict)


@dataclass(frozen=True)
class StopTable:
    passes: Annotated[int, Within(1, 10_000)] = 1
    captures_per_stay: Annotated[int, Within(1, 1_000)] = 1
    errors: Annotated[int | None, Within(1, 10**12)] = None
    bits: Annotated[int | None, Within(1, 10**15)] = None


@dataclass(frozen=True)
class UnattendedTable:
    """Its presence says that nobody watches; the bench must allow it."""

    at_most_s: Annotated[float, Within(1.0, 30 * 86_400.0)]


@dataclass(frozen=True)
class SequenceFile:
    sequence: str
    format_version: Literal[1]
    seed: Annotated[int, Within(0, 2**62)] = 1
    measurand: MeasurandTable | None = None
    signal: SignalTable | None = None
    settings: dict[str, Any] = field(default_factory=dict)
    before: tuple[BeforeTable, ...] = ()
    sweep: tuple[SweepTable, ...] = ()
    reference: dict[str, Any] = field(default_factory=dict)
    record: RecordTable = RecordTable()
    capture: CaptureTable | None = None
    demodulation: DemodulationTable | None = None
    stop: StopTable = StopTable()
    unattended: UnattendedTable | None = None
