"""The received power at the threshold, with two intervals: of the counts alone, and with what all points share.

Rules of composition: ISO/IEC Guide 98-3 (GUM). What all powers have in common is added once, in quadrature, and never
divided by the number of points; the meter's zero is common in watts, so all powers are moved by it and fitted again.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from owlight.quantity import dbm
from owlight.statistics.bootstrap import bootstrap_t
from owlight.statistics.curve import (
    BETA,
    FLOOR,
    LN_A,
    LOCAL,
    PHYSICAL,
    PHYSICAL_WITH_RESIDUE,
    RESIDUE,
    BerTable,
    Counts,
    counts_of,
    crossing,
    tabulate,
)
from owlight.statistics.fit import Fit, Task, fit
from owlight.statistics.goodness import lack_of_fit_p
from owlight.statistics.pooling import NEAR, counted, pool
from owlight.statistics.request import Reason, SensitivityRequest
from owlight.vocabulary.result import BudgetLine, Sensitivity, Stay

COVERAGE = 0.95
ENOUGH_STAYS = 8
ENOUGH_PASSES = 2
_DB = 10.0 / math.log(10.0)
_NODES = 7
_POOR_FIT_P = 0.01
_LEAST_TAU_DB = 0.005
"""No bench holds a power better than this between two stays, whatever few stays seem to say."""


@dataclass(frozen=True, eq=False)
class Fitted:
    """One fit and where it crosses the threshold."""

    task: Task
    found: Fit
    log_power: float
    gradient: np.ndarray[tuple[int, ...], np.dtype[np.float64]]
    slope_per_db: float
    threshold_ber: float

    @property
    def power_dbm(self) -> float:
        return dbm(self.task.counts.reference_w) + self.log_power * _DB

    @property
    def u_db(self) -> float:
        return math.sqrt(float(self.gradient @ self.found.covariance[0] @ self.gradient)) * _DB

    @property
    def freedom(self) -> int:
        return len(self.task.counts.power_w) - len(self.task.free)


def estimate(request: SensitivityRequest) -> Sensitivity | Reason:
    """The sensitivity of one group, or the reason why its stays give none.

    The statistical interval is that of Student's t, or of a parametric bootstrap where b or c ends at zero. The total
    one adds `request.common` and the meter's zero once, with the coverage factor of the effective degrees of freedom.

    >>> from owlight.quantity import watts
    >>> from owlight.theory import ber_of_snr_db, required_snr_db
    >>> from owlight.vocabulary.captures import Tributary
    >>> ber, at_threshold_db = ber_of_snr_db("QPSK"), required_snr_db("QPSK", 3.8e-3)
    >>> def stay(order):                                       # in nine steps across -38 dBm, where the threshold is
    ...     power_dbm = -40.0 + 0.5 * (order % 9)
    ...     errors = round(100_000 * float(ber(at_threshold_db + power_dbm + 38.0)))
    ...     counts = (Tributary("I", 100_000, errors), Tributary("Q", 100_000, errors))
    ...     watt = watts(power_dbm)
    ...     return Stay(order % 9, 1 + order // 9, order, "", False, "pass", watt, 0.01, watt, watt, counts, 1, 1)
    >>> found = estimate(SensitivityRequest(tuple(map(stay, range(18))), 3.8e-3, ber))
    >>> round(found.received_power_dbm, 2), found.low_dbm < -38.0 < found.high_dbm, found.extrapolated
    (-38.0, True, False)
    >>> estimate(SensitivityRequest((stay(0),), 3.8e-3, ber)).words[:42]
    '1 stays at 1 powers lie near the threshold'
    """
    points = [point for point in pool(request.stays, request.threshold_ber) if point.fitted]
    chosen = {point.point for point in points}
    stays = tuple(s for s in request.stays if s.point in chosen and not s.reference and counted(s)[1] > 0)
    free = PHYSICAL_WITH_RESIDUE if request.with_residue else PHYSICAL
    if len(stays) < len(free) + 2 or len(chosen) < len(free):
        return Reason(
            f"{len(stays)} stays at {len(chosen)} powers lie near the threshold and are believed; a sensitivity with "
            f"an interval needs at least {len(free) + 2} stays at {len(free)} powers."
        )
    bracketed = any(
        p.ber is not None and request.threshold_ber <= p.ber <= NEAR * request.threshold_ber for p in points
    )
    bracketed &= any(request.threshold_ber / NEAR <= (p.ber or p.ber_high) < request.threshold_ber for p in points)
    table = tabulate(request.ber_of_snr_db)
    counts = counts_of(stays, request.converter_noise if request.vertical == "follow" else {})
    whole = _fitted(table, counts, free, request.threshold_ber)
    if isinstance(whole, Reason):
        return whole
    p_value = lack_of_fit_p(whole.found, counts.point, len(free))
    if p_value is not None and p_value < _POOR_FIT_P:
        local = _local(table, stays, request, {p.point for p in points if p.ber is not None})
        if local is not None:
            local_p = lack_of_fit_p(local.found, local.task.counts.point, len(LOCAL))
            return _sensitivity(request, stays, local, local_p, not bracketed)
    return _sensitivity(request, stays, whole, p_value, not bracketed)


def _fitted(table: BerTable, counts: Counts, free: tuple[int, ...], threshold_ber: float) -> Fitted | Reason:
    floor_db = max(_LEAST_TAU_DB, float(np.sqrt(np.mean(counts.power_u_db**2))))
    task = Task(table, counts, free, floor_db, _NODES)
    found = fit(task)
    if not found.converged[0]:
        return Reason(
            "No curve fits: the counts do not fall with power as a receiver's would. Look at the points' findings."
        )
    log_power, gradient, slope = crossing(table, found.parameters, found.imbalance, _shares(counts), threshold_ber)
    if not np.isfinite(log_power[0]):
        return Reason(
            f"The fitted curve levels off above a BER of {threshold_ber:g}: at no power would the threshold be reached."
        )
    return Fitted(task, found, float(log_power[0]), gradient[0], float(slope[0]), threshold_ber)


def _shares(counts: Counts) -> np.ndarray[tuple[int, ...], np.dtype[np.float64]]:
    return np.asarray(counts.bits.sum(axis=0) / counts.bits.sum())


def _local(
    table: BerTable, stays: tuple[Stay, ...], request: SensitivityRequest, counted_points: set[int]
) -> Fitted | None:
    """A power law through the points within a decade of the threshold; None where these are too few."""
    near = {
        point.point
        for point in pool(stays, request.threshold_ber)
        if point.ber is not None and 1 / NEAR <= point.ber / request.threshold_ber <= NEAR
    } & counted_points
    kept = tuple(stay for stay in stays if stay.point in near)
    if len(kept) < len(LOCAL) + 2 or len(near) < 3:
        return None
    found = _fitted(table, counts_of(kept, {}), LOCAL, request.threshold_ber)
    return None if isinstance(found, Reason) else found


def _sensitivity(
    request: SensitivityRequest, stays: tuple[Stay, ...], fitted: Fitted, p_value: float | None, extrapolated: bool
) -> Sensitivity | Reason:
    from scipy.special import stdtrit

    at_dbm, freedom = fitted.power_dbm, float(fitted.freedom)
    boundary = bool(fitted.found.on_boundary[0])
    factor = float(stdtrit(freedom, 0.5 + COVERAGE / 2))
    if boundary:
        low_db, high_db = bootstrap_t(fitted, COVERAGE, request.seed)
        if not (math.isfinite(low_db) and math.isfinite(high_db)):
            return Reason("The counts leave the sensitivity without a bound on one side; measure at higher power.")
    else:
        low_db = high_db = factor * fitted.u_db
    u_statistical_db = (low_db + high_db) / 2.0 / factor
    u_common_db = math.hypot(*(line.u_db or 0.0 for line in request.common), _zero_u_db(request, stays, fitted))
    u_total_db = math.hypot(u_statistical_db, u_common_db)
    k = float(stdtrit(min(freedom * (u_total_db / u_statistical_db) ** 4, 1e9), 0.5 + COVERAGE / 2))
    lean_db = (high_db - low_db) / 2.0 * u_statistical_db / u_total_db
    a_w, b, c_per_w = _physical(fitted)
    return Sensitivity(
        group=stays[0].group,
        received_power_dbm=at_dbm,
        statistical_low_dbm=at_dbm - low_db,
        statistical_high_dbm=at_dbm + high_db,
        low_dbm=at_dbm - k * u_total_db + min(lean_db, 0.0),
        high_dbm=at_dbm + k * u_total_db + max(lean_db, 0.0),
        coverage=COVERAGE,
        u_statistical_db=u_statistical_db,
        u_common_db=u_common_db,
        extrapolated=extrapolated,
        method=_method(request, stays, fitted, boundary, k),
        slope_decades_per_db=fitted.slope_per_db / math.log(10.0),
        goodness_of_fit_p=p_value,
        stay_scatter_db=float(fitted.found.tau_db[0]),
        curve_a_w=a_w,
        curve_b=b,
        curve_c_per_w=c_per_w,
    )


def _physical(fitted: Fitted) -> tuple[tuple[float, ...], float, float]:
    """a in watts for each polarisation, b, c per watt. A power law is given by the a/P + b that touches it."""
    ln_a, b, c, beta = fitted.found.parameters[0]
    sides = (0.5, -0.5) if fitted.task.counts.bits.shape[1] == 2 else (0.0,)
    imbalance, reference_w = float(fitted.found.imbalance[0]), fitted.task.counts.reference_w
    if LN_A in fitted.task.free and BETA in fitted.task.free:
        z = math.exp(ln_a - beta * fitted.log_power)
        ln_a = math.log(beta * z) + fitted.log_power
        b = (1.0 - beta) * z
    a_w = tuple(float(math.exp(ln_a + side * imbalance) * reference_w) for side in sides)
    return a_w, float(b), float(c / reference_w) if RESIDUE in fitted.task.free else 0.0


def _zero_u_db(request: SensitivityRequest, stays: tuple[Stay, ...], fitted: Fitted) -> float:
    """Half the difference of two fits whose powers are all moved by the zero's uncertainty, up and down."""
    zero_w = zero_at_plane_w(stays, request.meter_zero_u_w)
    if not zero_w:
        return 0.0
    moved = []
    for side in (-zero_w, zero_w):
        power_w = np.maximum(fitted.task.counts.power_w + side, 0.1 * fitted.task.counts.power_w)
        again = _fitted(
            fitted.task.table, fitted.task.counts.with_power(power_w), fitted.task.free, fitted.threshold_ber
        )
        if not isinstance(again, Reason):
            moved.append(again.power_dbm)
    return abs(moved[1] - moved[0]) / 2.0 if len(moved) == 2 else 0.0


def zero_at_plane_w(stays: tuple[Stay, ...], meter_zero_u_w: float | None) -> float:
    """The zero's uncertainty carried from the meter to the reference plane by the stays' own ratio of the two.

    >>> zero_at_plane_w((Stay(0, 1, 0, "", False, "pass", 1e-7, 0.01, 9e-7, 9e-7, (), 1, 1),), 9e-12)
    1e-12
    """
    if not meter_zero_u_w:
        return 0.0
    ratios = []
    for stay in stays:
        taps = [tap for tap in (stay.tap_before_w, stay.tap_after_w) if tap is not None and tap > 0.0]
        if taps:
            ratios.append(stay.received_power_w * len(taps) / sum(taps))
    return meter_zero_u_w * (float(np.median(ratios)) if ratios else 1.0)


def _method(request: SensitivityRequest, stays: tuple[Stay, ...], fitted: Fitted, boundary: bool, k: float) -> str:
    model = "1/SNR = a/P + b" if FLOOR in fitted.task.free else "local two-parameter fit, 1/SNR = a P^-beta"
    if RESIDUE in fitted.task.free:
        model += " + c P"
    interval = "parametric bootstrap" if boundary else f"Student's t, {fitted.freedom} degrees of freedom"
    points = fitted.task.counts.point
    passes = int(np.bincount(points).max())
    words = f"{model}, maximum likelihood, {len(points)} stays at {len(set(points.tolist()))} powers; "
    words += f"statistical interval: {interval}; total: k = {k:.2f}"
    if len(points) < ENOUGH_STAYS or passes < ENOUGH_PASSES:
        words += (
            f"; only {len(points)} stays in {passes} passes, so how stays scatter is poorly known "
            f"({ENOUGH_STAYS} stays in {ENOUGH_PASSES} passes are needed)"
        )
    if request.vertical == "follow" and not request.converter_noise:
        words += "; the converter noise of the following range is counted in b"
    return words


def budget(request: SensitivityRequest, found: Sensitivity) -> tuple[BudgetLine, ...]:
    """What makes up the total uncertainty, the statistical part first; None stays "not assessed"."""
    stays = tuple(stay for stay in request.stays if not stay.reference)
    lines = [
        BudgetLine(
            "counts and scatter of stays",
            "A",
            found.u_statistical_db,
            None,
            f"from the fit; stays scatter by {found.stay_scatter_db:.3f} dB",
        ),
        *request.common,
    ]
    if request.meter_zero_u_w is not None:
        assessed = [line.u_db or 0.0 for line in request.common]
        zero_db = math.sqrt(max(found.u_common_db**2 - sum(u_db**2 for u_db in assessed), 0.0))
        zero_w = zero_at_plane_w(stays, request.meter_zero_u_w)
        words = f"common in watts: {zero_w:.2g} W at the reference plane, all powers moved and fitted again"
        lines.append(BudgetLine("zero of the power meter", "B", zero_db, None, words))
    return tuple(lines)
