"""A sequence with every term known and every value in the unit of its term."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from owlight.sequence.file import CaptureTable, Order, SignalTable, StopTable, UnattendedTable
from owlight.vocabulary.plan import Condition, Measurand
from owlight.vocabulary.values import Setting, Term, Value


@dataclass(frozen=True)
class Axis:
    """One sweep; the values in the order of the file, for `from`/`to`/`step` from the one to the other."""

    term: Term
    values: tuple[Value, ...]
    order: Order


@dataclass(frozen=True)
class Reference:
    """A point with settings of its own, revisited after every so many stays, so that drift shows."""

    every: int
    settings: tuple[Setting, ...]


@dataclass(frozen=True)
class Demodulation:
    """A named chain; `overrides` are figures of single stages."""

    chain: str
    overrides: Mapping[str, Mapping[str, bool | int | float | str]]


@dataclass(frozen=True)
class Sequence:
    name: str
    seed: int
    measurand: Measurand | None
    signal: SignalTable | None
    settings: tuple[Setting, ...]
    conditions: tuple[Condition, ...]
    axes: tuple[Axis, ...]
    """Outermost first."""
    reference: Reference | None
    readings: tuple[Term, ...]
    capture: CaptureTable | None
    demodulation: Demodulation | None
    stop: StopTable
    unattended: UnattendedTable | None
