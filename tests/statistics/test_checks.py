"""Each trust check on evidence that must pass, and on evidence that must not."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from owlight.statistics import Evidence, SensitivityRequest, estimate, pool, run_checks
from owlight.statistics.checks import capture, curve, run, stay
from owlight.vocabulary.captures import CaptureId, Demodulation, StageReport, Tributary
from owlight.vocabulary.result import Sensitivity

NIGHT_SEED = 12


def tributaries(*errors: int, bits: int = 100_000, snr_db: float | None = None) -> tuple[Tributary, ...]:
    return tuple(Tributary(n, bits, e, snr_db) for n, e in zip(("XI", "XQ", "YI", "YQ"), errors, strict=False))


def demodulated(
    *errors: int, peak: float = 0.9, second: float = 0.05, offset_hz: float = 1e8, snr_db: float = 8.5281
) -> Demodulation:
    stages = (
        StageReport("carrier", 0.0, {"frequency_offset_hz": offset_hz}),
        StageReport("synchronisation", 0.0, {"sync_peak": peak, "sync_second": second}),
    )
    made = tributaries(*errors, snr_db=snr_db)
    return Demodulation(CaptureId(3, 1, 1), "", "locked", "", made, snr_db, 30.0, 1.9, stages, 0.1)


@pytest.mark.parametrize(("fraction", "finding"), [(5e-5, "ok"), (5e-4, "doubtful"), (5e-3, "bad")])
def test_clipping_names_the_worst_lane(fraction: float, finding: str) -> None:
    found = capture.clipping("capture 1/1/1", {"XI": 0.0, "YQ": fraction})
    assert (found.finding, found.statistic) == (finding, fraction)
    assert "YQ" in found.words


def test_dead_lane_is_bad() -> None:
    assert capture.dead_lane("c", {"XI": 20.0, "XQ": 0.0}).finding == "bad"
    assert capture.dead_lane("c", {"XI": 20.0, "XQ": 18.0}).finding == "ok"


def test_repeated_record_is_bad() -> None:
    assert capture.duplicate_capture("c", {"XI": "a", "XQ": "b"}, {"z"}).finding == "ok"
    assert capture.duplicate_capture("c", {"XI": "a", "XQ": "b"}, {"b"}).finding == "bad"
    assert capture.duplicate_capture("c", {"XI": "a", "XQ": "a"}, set()).finding == "bad"


def test_short_record_is_bad() -> None:
    assert capture.short_record("c", {"XI": 1000, "XQ": 999}, 1000).finding == "bad"
    assert capture.short_record("c", {"XI": 1000, "XQ": 1000}, 1000).finding == "ok"


@pytest.mark.parametrize(("change_db", "finding"), [(0.02, "ok"), (-0.05, "doubtful"), (0.2, "bad"), (-0.2, "bad")])
def test_power_must_stay(change_db: float, finding: str) -> None:
    assert stay.power_before_and_after("stay 3/1", 1e-6, 1e-6 * 10 ** (change_db / 10)).finding == finding


def test_missing_tap_is_not_evaluated() -> None:
    assert stay.power_before_and_after("stay 3/1", None, 1e-6).finding == "not evaluated"
    assert stay.power_before_and_after("stay 3/1", 1e-6, -1e-9).finding == "not evaluated"
    assert stay.meter_floor("stay 3/1", None, 1e-9).finding == "not evaluated"


def test_meter_near_its_floor_is_bad() -> None:
    assert stay.meter_floor("stay 3/1", 9e-9, 1e-9).finding == "bad"
    assert stay.meter_floor("stay 3/1", 11e-9, 1e-9).finding == "ok"


@pytest.mark.parametrize(("second", "finding"), [(0.05, "ok"), (0.5, "doubtful"), (0.7, "bad")])
def test_pattern_needs_its_margin(second: float, finding: str) -> None:
    assert stay.pattern_margin("c", 0.9, second).finding == finding


@pytest.mark.parametrize(
    ("errors", "finding"),
    [
        ((380, 390, 370, 400), "ok"),
        ((380, 50_000, 370, 400), "bad"),  # one tributary without its pattern: 1/8 in the pooled ratio
        ((50_000, 50_100, 49_900, 50_000), "bad"),
        ((25_000, 25_020, 24_990, 25_000), "bad"),  # a wrong bit of two in each symbol of 16QAM
        ((12_500, 12_500, 12_500, 12_500), "ok"),  # plain noise can do that
    ],
)
def test_fractions_of_wrong_lock_are_bad(errors, finding) -> None:
    assert stay.wrong_lock("c", tributaries(*errors)).finding == finding


def test_uneven_tributaries_are_doubtful() -> None:
    assert stay.tributaries_alike("c", tributaries(380, 400, 370, 410)).finding == "ok"
    assert stay.tributaries_alike("c", tributaries(380, 400, 370, 2000)).finding == "doubtful"
    assert stay.tributaries_alike("c", tributaries(380, 400, 370, 9000)).finding == "bad"
    # 4 against 20 errors is a factor of five that chance explains
    assert stay.tributaries_alike("c", tributaries(4, 12, 9, 20)).finding == "ok"


def test_counted_ber_must_fit_the_snr(qpsk) -> None:
    assert stay.snr_against_ber("c", demodulated(380, 385, 370, 390), qpsk).finding == "ok"
    assert stay.snr_against_ber("c", demodulated(980, 985, 970, 990), qpsk).finding == "doubtful"
    assert stay.snr_against_ber("c", demodulated(50, 60, 55, 58), qpsk).finding == "bad"


def test_beat_outside_window_is_doubtful() -> None:
    assert stay.beat_frequency("c", 3e8, (-1e9, 1e9)).finding == "ok"
    assert stay.beat_frequency("c", 3e9, (-1e9, 1e9)).finding == "doubtful"


def test_no_lock_is_reported_not_counted() -> None:
    lost = replace(demodulated(1), status="no lock", reason="best correlation 0.06", tributaries=())
    (check,) = stay.demodulation(lost)
    assert (check.name, check.finding) == ("lock", "doubtful") and "0.06" in check.words


def test_error_queue_entries_are_bad() -> None:
    assert run.error_queue("run", ()).finding == "ok"
    assert run.error_queue("run", None).finding == "not evaluated"
    assert run.error_queue("run", ('-222,"Data out of range"',)).finding == "bad"


def curve_of(design, **changes):
    stays = design(**changes).night(np.random.default_rng(NIGHT_SEED))
    return pool(stays, 3.8e-3), stays


def test_few_errors_are_doubtful_then_bad(design) -> None:
    points, _ = curve_of(design)
    for errors, finding in ((400, "ok"), (50, "doubtful"), (3, "bad")):
        assert curve.error_count(replace(points[0], errors=errors)).finding == finding


def test_rise_with_power_is_seen(design) -> None:
    points, _ = curve_of(design)
    assert curve.monotonic(points).finding == "ok"
    swapped = [replace(p, received_power_dbm=-77.0 - p.received_power_dbm) for p in points]
    assert curve.monotonic(swapped).finding == "bad"


@pytest.mark.parametrize(("stretch", "finding"), [(1.0, "ok"), (1.4, "doubtful"), (1.8, "bad"), (0.8, "bad")])
def test_wrong_power_axis_shows_in_slope(stretch: float, finding: str, design, qpsk) -> None:
    """A tap whose decibels are too large makes the curve shallow; too small, steeper than any receiver's."""
    points, _ = curve_of(design, floor=0.0)
    moved = [replace(p, received_power_dbm=-38.5 + stretch * (p.received_power_dbm + 38.5)) for p in points]
    assert curve.slope(moved, 3.8e-3, qpsk).finding == finding


def test_slope_of_a_floor_is_below_one(design, qpsk) -> None:
    points, _ = curve_of(design, floor=0.02, bits=40_000_000, scatter_db=0.0, reading_db=0.0001)
    found = curve.slope(points, 3.8e-3, qpsk)
    # at the threshold 1/SNR is 0.14, of which 0.02 does not fall with power: 1 - 0.02/0.14, give or take the span
    assert found.statistic == pytest.approx(1 - 0.02 / 0.14, abs=0.03)


def test_bracketing_needs_both_sides(design) -> None:
    inside, _ = curve_of(design)
    outside, _ = curve_of(design, powers_dbm=(-40.5, -40.0, -39.5))
    assert curve.bracketing(inside, 3.8e-3).finding == "ok"
    assert curve.bracketing(outside, 3.8e-3).finding == "doubtful"


def test_run_checks_ask_everything_once(design, qpsk) -> None:
    points, stays = curve_of(design)
    answer = estimate(SensitivityRequest(stays, 3.8e-3, qpsk))
    assert isinstance(answer, Sensitivity)
    captures = (demodulated(380, 385, 370, 390), demodulated(380, 50_000, 370, 400))
    window = (-1e9, 1e9)
    found = run_checks(Evidence(points, stays, captures, (answer,), 3.8e-3, qpsk, 1e-9, window, ()))
    of_run = {check.name: check.finding for check in found if check.subject == "run"}
    assert of_run == {
        "monotonic": "ok",
        "slope": "ok",
        "bracketing": "ok",
        "pattern margin": "ok",
        "lane map": "not evaluated",
        "wrong lock": "bad",
        "tributaries alike": "bad",
        "SNR against BER": "bad",
        "beat frequency": "ok",
        "power before and after": "ok",
        "meter floor": "ok",
        "error queue": "ok",
    }
    assert sum(check.name == "error count" for check in found) == len(points)
    assert "1 of 2 captures" in next(check.words for check in found if check.name == "wrong lock")


def test_run_without_evidence_evaluates_nothing() -> None:
    assert {check.finding for check in run_checks(Evidence(()))} == {"not evaluated"}
