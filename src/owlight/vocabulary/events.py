"""What happened: every event is durable when `emit` returns."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from owlight.vocabulary.captures import Capture, CaptureId, Demodulation
from owlight.vocabulary.plan import Attempt
from owlight.vocabulary.values import Applied, Exchange, Identity, Reading, Stamp


@dataclass(frozen=True)
class Check:
    """A trust check's answer; finding: ok, doubtful, bad, not evaluated; subject: run, "point 3", "capture 3/1/1"."""

    name: str
    subject: str
    statistic: float | None
    limit: float | None
    finding: str
    words: str


@dataclass(frozen=True)
class ReceivedPower:
    """How the received power of a stay was set and measured; the mean of before and after, in watts, is the x axis."""

    requested_dbm: float
    attenuation_set_db: float
    attenuation_read_db: float
    tap_before_w: float | None
    tap_before_sd_w: float | None
    tap_after_w: float | None
    tap_after_sd_w: float | None
    received_power_dbm: float | None
    received_power_u_db: float | None


@dataclass(frozen=True)
class SegmentStarted:
    """An uninterrupted part of a run begins."""

    at: Stamp
    number: int
    reason: str


@dataclass(frozen=True)
class AttemptFinished:
    """A stay is over. `outcome`: "ok" or "failed" (then `reason` says why and nothing of it enters the curve)."""

    at: Stamp
    attempt: Attempt
    outcome: str
    reason: str
    started: Stamp
    seconds: float
    received_power: ReceivedPower | None
    readings: tuple[Reading, ...]
    captures: tuple[CaptureId, ...]
    demodulations: tuple[Demodulation, ...]
    checks: tuple[Check, ...]


@dataclass(frozen=True)
class Note:
    """Something a person should know. `severity`: info, warning, fault or interlock."""

    at: Stamp
    severity: str
    words: str
    role: str = ""


@dataclass(frozen=True)
class SafeStepOutcome:
    role: str
    words: str
    read_back: str
    confirmed: bool


@dataclass(frozen=True)
class SafeState:
    """Confirmed only if every step was read back as expected; otherwise the unconfirmed steps say where."""

    at: Stamp
    confirmed: bool
    steps: tuple[SafeStepOutcome, ...]


@dataclass(frozen=True)
class SegmentEnded:
    """`state`: finished, broken off, called off or gave up."""

    at: Stamp
    state: str
    reason: str


Event = (
    SegmentStarted
    | Identity
    | Exchange
    | Applied
    | Reading
    | Capture
    | AttemptFinished
    | Check
    | Note
    | SafeState
    | SegmentEnded
)
Emit = Callable[[Event], None]
History = tuple[AttemptFinished, ...]
