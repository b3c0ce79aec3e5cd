"""The numbers a run ends in."""

from __future__ import annotations

from dataclasses import dataclass

from owlight.vocabulary.captures import Tributary
from owlight.vocabulary.events import Check


@dataclass(frozen=True)
class Stay:
    """One stay as statistics sees it: measured power and pooled counts of its captures that locked.

    `order` is the position in time; `group` names the settings of outer sweep axes, "" if there are none.
    `received_power_u_db` is the reading's own (statistical) standard uncertainty.
    """

    point: int
    attempt: int
    order: int
    group: str
    reference: bool
    reason: str
    received_power_w: float
    received_power_u_db: float
    tap_before_w: float | None
    tap_after_w: float | None
    tributaries: tuple[Tributary, ...]
    captures_locked: int
    captures_total: int


@dataclass(frozen=True)
class CurvePoint:
    """One point of the BER curve, its stays pooled: errors and bits are summed, never BERs averaged.

    With zero errors `ber` is None and `upper_limit` true: `ber_high` is then the one-sided 95 % limit.
    `lo_power_dbm` and other swept settings of an outer axis stand in `group`.
    """

    point: int
    group: str
    received_power_dbm: float
    received_power_u_db: float
    errors: int
    bits: int
    ber: float | None
    ber_low: float
    ber_high: float
    upper_limit: bool
    stays: int
    captures_locked: int
    captures_total: int
    fitted: bool
    findings: tuple[str, ...] = ()


@dataclass(frozen=True)
class Sensitivity:
    """`low_dbm`/`high_dbm` are the total interval; the statistical one stands beside it."""

    group: str
    received_power_dbm: float
    statistical_low_dbm: float
    statistical_high_dbm: float
    low_dbm: float
    high_dbm: float
    coverage: float
    u_statistical_db: float
    u_common_db: float
    extrapolated: bool
    method: str
    slope_decades_per_db: float
    goodness_of_fit_p: float | None
    stay_scatter_db: float
    curve_a_w: tuple[float, ...]
    curve_b: float
    curve_c_per_w: float = 0.0


@dataclass(frozen=True)
class BudgetLine:
    """A component of the uncertainty; `u_db` None prints as "not assessed", never as zero."""

    component: str
    kind: str
    u_db: float | None
    degrees_of_freedom: float | None
    words: str


@dataclass(frozen=True)
class Penalty:
    """`reference` names what the sensitivity is held against."""

    reference: str
    penalty_db: float
    reference_dbm: float
    group: str = ""


@dataclass(frozen=True)
class Conclusion:
    """What a run's counts say; empty `sensitivities` come with a reason in `words`."""

    points: tuple[CurvePoint, ...]
    sensitivities: tuple[Sensitivity, ...]
    penalties: tuple[Penalty, ...]
    budget: tuple[BudgetLine, ...]
    checks: tuple[Check, ...]
    words: str
