"""Stays pooled to points of the curve: errors and bits are summed, never BERs averaged.

A point that lost lock often, or at all near the threshold, is doubtful and stays out of the fit until a person
decides: the captures that locked are the lucky ones, and dropping the others would flatter the BER.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence

from owlight.quantity import dbm
from owlight.statistics.intervals import exact_interval, upper_limit
from owlight.vocabulary.result import CurvePoint, Stay

MOST_LOST_LOCK = 0.05
NEAR = 10.0
"""A decade: nearer to the threshold than this a single capture without lock makes a point doubtful."""
FIT_FACTOR = 30.0
"""Only points within this factor of the threshold are fitted: further away other imperfections rule."""
LOST_LOCK = "captures without lock"
NO_LOCK = "no capture locked"
FEW_ERRORS = "fewer than 10 errors"


def groups(stays: Iterable[Stay]) -> tuple[str, ...]:
    """The names of the curves, in the order in which they were first measured.

    >>> def stay(order, group):
    ...     return Stay(0, 1, order, group, False, "pass", 1e-7, 0.01, None, None, (), 1, 1)
    >>> groups([stay(2, "lo_power 12 dBm"), stay(1, "lo_power 9 dBm")])
    ('lo_power 9 dBm', 'lo_power 12 dBm')
    """
    return tuple(dict.fromkeys(stay.group for stay in sorted(stays, key=lambda stay: stay.order) if not stay.reference))


def pool(stays: Iterable[Stay], threshold_ber: float | None = None) -> tuple[CurvePoint, ...]:
    """One CurvePoint a point, by group and falling power; reference stays serve drift and are left out.

    A stay measured again because of its result is pooled with the original. Without a threshold no point is fitted.
    A point of which no capture locked has 0 bits, no BER, and the interval from 0 to 1.

    >>> from owlight.vocabulary.captures import Tributary
    >>> def stay(attempt, errors):
    ...     counts = (Tributary("I", 10_000, errors), Tributary("Q", 10_000, 0))
    ...     return Stay(0, attempt, attempt, "", False, "pass", 1e-7, 0.01, None, None, counts, 1, 1)
    >>> (point,) = pool([stay(1, 12), stay(2, 8)])
    >>> point.errors, point.bits, point.ber, round(point.received_power_dbm, 6)
    (20, 40000, 0.0005, -40.0)
    """
    by_point: dict[tuple[str, int], list[Stay]] = {}
    curve = sorted((stay for stay in stays if not stay.reference), key=lambda stay: stay.order)
    for stay in curve:
        by_point.setdefault((stay.group, stay.point), []).append(stay)
    order = groups(curve)
    pooled = [_pooled(group, point, found, threshold_ber) for (group, point), found in by_point.items()]
    return tuple(sorted(pooled, key=lambda found: (order.index(found.group), -found.received_power_dbm)))


def counted(stay: Stay) -> tuple[int, int]:
    """Errors and bits of all tributaries.

    >>> from owlight.vocabulary.captures import Tributary
    >>> counts = (Tributary("I", 100, 3), Tributary("Q", 100, 4))
    >>> counted(Stay(0, 1, 0, "", False, "pass", 1e-7, 0.01, None, None, counts, 1, 1))
    (7, 200)
    """
    return sum(t.errors for t in stay.tributaries), sum(t.bits for t in stay.tributaries)


def _pooled(group: str, point: int, stays: Sequence[Stay], threshold_ber: float | None) -> CurvePoint:
    errors = sum(counted(stay)[0] for stay in stays)
    bits = sum(counted(stay)[1] for stay in stays)
    limit = errors == 0
    low, high = exact_interval(errors, bits) if bits else (0.0, 1.0)
    if limit and bits:
        high = upper_limit(bits)
    locked = sum(stay.captures_locked for stay in stays)
    total = sum(stay.captures_total for stay in stays)
    findings = _findings(errors, bits, (low, high), total - locked, total, threshold_ber)
    # more bits, more weight: the power belongs to the counts beside it
    weights = [max(counted(stay)[1], 1) / max(bits, len(stays)) for stay in stays]
    power_w = sum(w * stay.received_power_w for w, stay in zip(weights, stays, strict=True)) / sum(weights)
    u_db = math.sqrt(sum((w * stay.received_power_u_db) ** 2 for w, stay in zip(weights, stays, strict=True)))
    believed = bits > 0 and LOST_LOCK not in findings
    return CurvePoint(
        point=point,
        group=group,
        received_power_dbm=dbm(power_w),
        received_power_u_db=u_db / sum(weights),
        errors=errors,
        bits=bits,
        ber=None if limit else errors / bits,
        ber_low=low,
        ber_high=high,
        upper_limit=limit,
        stays=len(stays),
        captures_locked=locked,
        captures_total=total,
        fitted=believed and threshold_ber is not None and _near(low, high, threshold_ber, FIT_FACTOR),
        findings=findings,
    )


def _findings(
    errors: int, bits: int, interval: tuple[float, float], lost: int, total: int, threshold_ber: float | None
) -> tuple[str, ...]:
    if bits == 0:
        return (NO_LOCK,)
    found = []
    near = threshold_ber is not None and _near(*interval, threshold_ber, NEAR)
    if lost > MOST_LOST_LOCK * total or (lost and near):
        found.append(LOST_LOCK)
    if errors < 10:
        found.append(FEW_ERRORS)
    return tuple(found)


def _near(low: float, high: float, threshold_ber: float, factor: float) -> bool:
    """The interval, not the ratio: a point with few errors must not be chosen by what it happened to count."""
    return high >= threshold_ber / factor and low <= threshold_ber * factor
