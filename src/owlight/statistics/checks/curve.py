"""Questions about the curve: enough errors, falling, as steep as the format, threshold inside."""

from __future__ import annotations

import math
from collections.abc import Sequence
from itertools import pairwise

import numpy as np

from owlight.statistics.checks.finding import BAD, DOUBTFUL, OK, Limits, judged, not_evaluated
from owlight.statistics.pooling import FIT_FACTOR, LOST_LOCK, NEAR, NO_LOCK
from owlight.statistics.request import BerOfSnrDb
from owlight.vocabulary.events import Check
from owlight.vocabulary.result import CurvePoint

ERRORS = Limits(doubtful=100.0, bad=10.0, low_is_bad=True)
RISE_SIGMA = Limits(doubtful=2.0, bad=3.0)
SHALLOW = Limits(doubtful=0.8, bad=0.6, low_is_bad=True)
STEEPER_SIGMA = 3.0
_STEEPER_LEAST = 1.02
STAY_SCATTER_DB = 0.05
_FEWEST = 3


def subject_of(point: CurvePoint) -> str:
    return f"point {point.point}"


def error_count(point: CurvePoint, limits: Limits = ERRORS) -> Check:
    """100 errors give the BER to about 20 % with 95 % coverage, 10 to a factor of two (F. Garwood, 1936)."""
    name = "error count"
    if point.bits == 0:
        return not_evaluated(name, subject_of(point), "nothing was counted")
    shown = (
        f"BER below {point.ber_high:.2g}" if point.upper_limit else f"BER {point.ber_low:.2g} to {point.ber_high:.2g}"
    )
    words = f"{point.errors} errors in {point.bits} bits: {shown}"
    return judged(name, subject_of(point), float(point.errors), limits, words)


def lock(point: CurvePoint) -> Check:
    """Captures without lock are never dropped in silence: those that locked are the lucky ones."""
    lost = point.captures_total - point.captures_locked
    words = f"{point.captures_locked} of {point.captures_total} captures locked"
    finding = BAD if NO_LOCK in point.findings else DOUBTFUL if LOST_LOCK in point.findings else OK
    if finding != OK:
        words += "; the point stays out of the fit until a person decides"
    return Check("lost lock", subject_of(point), lost / max(point.captures_total, 1), 0.05, finding, words)


def monotonic(points: Sequence[CurvePoint], scatter_db: float = STAY_SCATTER_DB, limits: Limits = RISE_SIGMA) -> Check:
    """Does the BER rise with power anywhere by more than counts and the scatter of stays explain?

    `scatter_db` is the scatter of one stay's power; it counts as the change of BER that the curve's own slope gives.
    """
    name = "monotonic"
    usable = sorted((p for p in points if p.ber is not None and p.errors >= 10), key=lambda p: p.received_power_dbm)
    if len(usable) < 2:
        return not_evaluated(name, "run", "fewer than two points with ten errors")
    worst, words = -math.inf, ""
    for lower, upper in pairwise(usable):
        rise = math.log((upper.ber or 1.0) / (lower.ber or 1.0))
        sigma = math.hypot(*(_log_sigma(p, scatter_db) for p in (lower, upper)))
        if rise / sigma > worst:
            worst = rise / sigma
            words = f"from {lower.received_power_dbm:.2f} to {upper.received_power_dbm:.2f} dBm the BER changes by "
            words += f"{100 * math.expm1(rise):+.1f} % ({worst:+.1f} standard deviations)"
    return judged(name, "run", worst, limits, words)


def _log_sigma(point: CurvePoint, scatter_db: float) -> float:
    slope = math.log(10.0) * 0.4  # decades in a decibel that QPSK has near 4e-3, steeper formats scatter little more
    return math.hypot(1.0 / math.sqrt(point.errors), slope * scatter_db / math.sqrt(point.stays))


def slope(
    points: Sequence[CurvePoint],
    threshold_ber: float,
    ber_of_snr_db: BerOfSnrDb,
    scatter_db: float = STAY_SCATTER_DB,
    limits: Limits = SHALLOW,
) -> Check:
    """Decibels of effective SNR per decibel of power: 1 for the format's own curve, less towards a floor.

    More than 1 is impossible for any receiver whose noise does not depend on the signal: a wrong power axis (the tap's
    range), clipping or saturation. That is bad at once; too shallow is doubtful, then bad.
    """
    name = "slope"
    near = [p for p in points if p.fitted and p.ber is not None and p.errors >= 10]
    near = [p for p in near if 1 / FIT_FACTOR <= (p.ber or 0.0) / threshold_ber <= FIT_FACTOR]
    powers = np.array([p.received_power_dbm for p in near])
    if len(near) < _FEWEST or np.ptp(powers) == 0.0:
        return not_evaluated(name, "run", "fewer than three points with ten errors near the threshold")
    snr_db, u_db = _effective_snr_db(near, ber_of_snr_db, scatter_db)
    weight = 1.0 / u_db**2
    centred = powers - (weight * powers).sum() / weight.sum()
    spread = float((weight * centred**2).sum())
    found = float((weight * centred * snr_db).sum()) / spread
    residual = snr_db - (weight * snr_db).sum() / weight.sum() - found * centred
    excess = max(1.0, float((weight * residual**2).sum()) / (len(near) - 2))
    u_slope = math.sqrt(excess / spread)
    words = f"{found:.3f} dB of SNR per dB of power (standard uncertainty {u_slope:.3f}); the format has 1"
    if found > max(_STEEPER_LEAST, 1.0 + STEEPER_SIGMA * u_slope):
        words += ". Steeper than theory: look at the power axis first"
        return Check(name, "run", found, 1.0, BAD, words)
    return judged(name, "run", found, limits, words)


def _effective_snr_db(
    points: Sequence[CurvePoint], ber_of_snr_db: BerOfSnrDb, scatter_db: float
) -> tuple[np.ndarray[tuple[int, ...], np.dtype[np.float64]], np.ndarray[tuple[int, ...], np.dtype[np.float64]]]:
    """The SNR that each point's BER means, and its standard uncertainty, both in dB."""
    axis_db = np.arange(-10.0, 40.0, 0.01)
    log_ber = np.log(np.maximum(ber_of_snr_db(axis_db), 1e-300))
    measured = np.log([p.ber or 1.0 for p in points])
    snr_db = np.interp(-measured, -log_ber, axis_db)
    by_db = np.abs(np.interp(snr_db, axis_db, np.gradient(log_ber, 0.01)))
    counting_db = 1.0 / np.sqrt([p.errors for p in points]) / by_db
    return snr_db, np.hypot(counting_db, scatter_db / np.sqrt([p.stays for p in points]))


def bracketing(points: Sequence[CurvePoint], threshold_ber: float) -> Check:
    """Is the threshold crossed inside the data, with points on both sides within a decade?"""
    fitted = [p for p in points if p.fitted]
    above = any(p.ber is not None and threshold_ber <= p.ber <= NEAR * threshold_ber for p in fitted)
    below = any(threshold_ber / NEAR <= (p.ber or p.ber_high) < threshold_ber for p in fitted)
    sides = float(above) + float(below)
    if sides == 2.0:
        words = "points within a decade on both sides of the threshold"
    else:
        missing = "above" if below else "below" if above else "on either side of"
        words = f"no point within a decade {missing} the threshold: the sensitivity is extrapolated"
    return Check("bracketing", "run", sides, 2.0, OK if sides == 2.0 else DOUBTFUL, words)
