"""A driver file. Every term of its role is in it, or said to be absent."""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property
from typing import Annotated, Literal

from owlight import quantity
from owlight.reader import Within
from owlight.vocabulary.terms import ROLES, TERMS
from owlight.vocabulary.values import Term

FITS: dict[str, tuple[str, ...]] = {"laser": ("signal_laser", "local_oscillator")}
"""Kinds of instrument that serve more than one role; any other kind is called as its role."""

Spoken = Literal["", "dBm", "W", "mW", "dB", "m", "nm", "Hz", "GHz", "THz", "s", "ms", "V", "A", "Bd"]


@dataclass(frozen=True)
class Settled:
    """How an instrument shows that a change is over.

    "opc": `*OPC?` answers only then. "condition": `bit` of the register that `query` answers has fallen. "stable": two
    read-backs in a row lie within the tolerance of what was asked. "wait": nothing shows it, so `wait` is waited.
    """

    by: Literal["opc", "condition", "stable", "wait"]
    query: str = "STAT:OPER:COND?"
    bit: Annotated[int, Within(0, 15)] = 1
    every_s: Annotated[float, Within(1e-3, 10.0)] = 0.05
    at_most_s: Annotated[float, Within(1e-3, 3600.0)] = 10.0
    wait_s: Annotated[float, Within(0.0, 3600.0)] = 0.0


@dataclass(frozen=True)
class Span:
    """Ends with their units, or plain numbers where the term has none."""

    low: str | float
    high: str | float


@dataclass(frozen=True)
class Setting:
    """`{value}` in `command` stands for the value in the unit that the instrument `speaks`.

    `factor` turns the value in that unit into the number sent: 0.125 where volts a division are spoken and a range has
    eight of them, -1 where loss is negative. `suffix` follows the number. `words` are spoken for true and false, or for
    the words of our files; capitals mark the short form. `coupled` names terms that this setting may move.
    """

    command: str
    query: str
    speaks: Spoken = ""
    suffix: str = ""
    factor: float = 1.0
    words: dict[str, str] = field(default_factory=dict)
    range_: Literal["asked", "none"] | Span = "none"
    tolerance: str | float | None = None
    settled: Settled = field(default_factory=lambda: Settled("opc"))
    coupled: tuple[str, ...] = ()


@dataclass(frozen=True)
class Reading:
    """The query answers a fresh value. `at_most` bounds the wait for the answer."""

    query: str
    speaks: Spoken = ""
    factor: float = 1.0
    at_most_s: Annotated[float, Within(1e-3, 3600.0)] = 10.0


@dataclass(frozen=True)
class Action:
    command: str
    settled: Settled = field(default_factory=lambda: Settled("opc"))


@dataclass(frozen=True)
class Scaling:
    """Volts of a code: asked of the instrument lane by lane, or the full range over the number of codes it spans.

    Without a query of the offset, code zero is zero volts.
    """

    by: Literal["queries", "range"]
    volts_per_code: str = ""
    offset: str = ""
    codes_per_range: float = 256.0


@dataclass(frozen=True)
class Record:
    """`{channel}` stands for the number of a lane's channel.

    `prepare` is sent once before the first record. `lowest_code` and `highest_code` are where the converter clips.
    """

    arm: str
    settled: Settled
    fetch: str
    data_type: Literal["int8", "int16"]
    byte_order: Literal["least significant first", "most significant first"]
    scaling: Scaling
    lowest_code: int
    highest_code: int
    prepare: tuple[str, ...] = ()
    abort: str = ""
    terminator_after_block: bool = True
    fetch_at_most_s: Annotated[float, Within(0.1, 3600.0)] = 60.0

    @property
    def bytes_per_sample(self) -> int:
        return {"int8": 1, "int16": 2}[self.data_type]


@dataclass(frozen=True)
class Driver:
    """`lacks` names what the standards demand and this instrument does not have."""

    driver: str
    format_version: Literal[1]
    role: str
    about: str = ""
    lacks: tuple[Literal["*OPC?", "error queue", "status registers"], ...] = ()
    error_query: str = "SYST:ERR?"
    absent: tuple[str, ...] = ()
    setting: dict[str, Setting] = field(default_factory=dict)
    reading: dict[str, Reading] = field(default_factory=dict)
    action: dict[str, Action] = field(default_factory=dict)
    record: Record | None = None

    def fits(self, role: str) -> bool:
        return role in FITS.get(self.role, (self.role,))

    def knows(self, term: Term) -> bool:
        if term.name == "record" and self.record is not None:
            return self.fits(term.role)
        return self.fits(term.role) and any(term.name in t for t in (self.setting, self.reading, self.action))

    @cached_property
    def terms(self) -> dict[str, Term]:
        """Every term of the kind of instrument, in the first role that it fits."""
        role = FITS.get(self.role, (self.role,))[0]
        return {term.name: term for term in TERMS if term.role == role and role in ROLES}

    def range_of(self, term: Term) -> tuple[float, float] | None:
        """(low, high) in the unit of the term; None where the instrument has to be asked, or nothing is said."""
        setting = self.setting.get(term.name)
        if setting is None or not isinstance(setting.range_, Span):
            return None
        unit = TERMS[term].unit
        return quantities(setting.range_, unit)

    def tolerance_of(self, term: Term) -> float | None:
        """How far a read-back may lie from what was set, in the unit of the term (dB for a level); None is exactly."""
        setting = self.setting.get(term.name)
        if setting is None or setting.tolerance is None:
            return None
        return plain(setting.tolerance, difference_unit(TERMS[term].unit))


def quantities(span: Span, unit: str) -> tuple[float, float]:
    """The ends of a range in `unit`; an optical frequency may stand for a wavelength here."""
    low, high = (
        quantity.parse(end, unit) if unit == "nm" and isinstance(end, str) else plain(end, unit)
        for end in (span.low, span.high)
    )
    return low, high


def difference_unit(unit: str) -> str:
    """
    >>> difference_unit("dBm"), difference_unit("Hz")
    ('dB', 'Hz')
    """
    return "dB" if unit == "dBm" else unit


def plain(written: str | float, unit: str) -> float:
    """A quantity or a plain number, in `unit`; ValueError says what is allowed."""
    if isinstance(written, str) != bool(unit):
        raise ValueError(f"{written!r} is not {quantity.kind_of(unit) if unit else 'a plain number'}")
    if not isinstance(written, str):
        return float(written)
    if unit == "nm":  # only a length: a difference of frequencies is no difference of wavelengths
        return quantity.parse(written, "m") * 1e9
    return quantity.parse(written, unit)
