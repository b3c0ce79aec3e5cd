"""Stays become points: sums, limits, and what lost lock does."""

from dataclasses import replace

import pytest

from owlight.statistics import exact_interval, groups, pool, upper_limit
from owlight.vocabulary.captures import Tributary
from owlight.vocabulary.result import Stay


def stay(point=0, attempt=1, errors=100, bits=100_000, **changes) -> Stay:
    tributaries = (Tributary("XI", bits // 2, errors // 2), Tributary("XQ", bits // 2, errors - errors // 2))
    made = Stay(point, attempt, attempt * 10 + point, "", False, "pass", 1e-7, 0.02, 1e-6, 1e-6, tributaries, 1, 1)
    return replace(made, **changes)


def test_errors_and_bits_are_summed() -> None:
    (point,) = pool([stay(errors=10, bits=1000), stay(attempt=2, errors=30, bits=9000)], 3.8e-3)
    assert (point.errors, point.bits, point.ber, point.stays) == (40, 10_000, 40 / 10_000, 2)
    assert (point.ber_low, point.ber_high) == exact_interval(40, 10_000)


def test_power_belongs_to_the_bits() -> None:
    (point,) = pool([stay(bits=1000, received_power_w=1e-7), stay(attempt=2, bits=3000, received_power_w=2e-7)])
    assert point.received_power_dbm == pytest.approx(-37.56962, abs=1e-5)  # 10 log10 of 1.75e-4 mW
    assert point.received_power_u_db == pytest.approx(0.02 * (1 / 16 + 9 / 16) ** 0.5)


def test_zero_errors_are_a_limit() -> None:
    (point,) = pool([stay(errors=0)], 3.8e-3)
    assert (point.ber, point.upper_limit, point.ber_low) == (None, True, 0.0)
    assert point.ber_high == upper_limit(100_000)
    assert not point.fitted  # 3e-5 lies more than a factor of 30 below the threshold


def test_point_without_lock_has_no_ber() -> None:
    (point,) = pool([stay(tributaries=(), captures_locked=0, captures_total=2)], 3.8e-3)
    assert (point.ber, point.bits, point.fitted) == (None, 0, False)
    assert point.findings == ("no capture locked",)


def test_lost_lock_near_threshold_is_doubtful() -> None:
    near = stay(errors=300, captures_locked=39, captures_total=40)  # 2.5 %, within a decade
    far = stay(point=1, errors=20, captures_locked=39, captures_total=40)  # 2e-4, further away
    often = stay(point=2, errors=20, captures_locked=37, captures_total=40)
    points = {point.point: point for point in pool([near, far, often], 3.8e-3)}
    assert "captures without lock" in points[0].findings and not points[0].fitted
    assert points[1].findings == () and points[1].fitted
    assert "captures without lock" in points[2].findings and not points[2].fitted


def test_remeasured_stay_is_pooled_with_original() -> None:
    again = stay(attempt=2, errors=50, reason="remeasure")
    (point,) = pool([stay(errors=500), again], 3.8e-3)
    assert point.errors == 550


def test_reference_stays_are_left_out() -> None:
    assert len(pool([stay(), stay(point=5, reference=True)])) == 1


def test_groups_keep_their_order() -> None:
    stays = [stay(group="lo_power 13 dBm", order=1), stay(point=1, group="lo_power 10 dBm", order=2)]
    assert groups(stays) == ("lo_power 13 dBm", "lo_power 10 dBm")
    assert [point.group for point in pool(stays)] == list(groups(stays))


def test_only_points_near_threshold_are_fitted() -> None:
    ratios = {0: 20_000, 1: 380, 2: 30, 3: 1}  # 0.2, 3.8e-3, 3e-4, 1e-5
    found = {p.point: p.fitted for p in pool([stay(point=p, errors=e) for p, e in ratios.items()], 3.8e-3)}
    assert found == {0: False, 1: True, 2: True, 3: False}
