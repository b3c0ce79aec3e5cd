"""The sensitivity: against brute force, against counts without noise, and every way in which there is none."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import brentq, minimize
from scipy.stats import binom, norm, t

from owlight.statistics import Reason, SensitivityRequest, budget, estimate
from owlight.statistics.curve import LN_A, PHYSICAL, counts_of, tabulate
from owlight.statistics.fit import Task, fit
from owlight.vocabulary.captures import Tributary
from owlight.vocabulary.result import BudgetLine, Sensitivity

SHAPE = (-39.6, -39.2, -38.8, -38.4, -38.0, -37.6)


def expected_counts(design, each=10**9, powers_dbm=SHAPE, passes=3):
    """Counts without any noise, so many that rounding them is nothing."""
    (first, *_) = design(powers_dbm=powers_dbm, passes=1).night(np.random.default_rng(0))
    made = design(powers_dbm=powers_dbm)

    def stay(point, attempt):
        power_w = 1e-3 * 10 ** (powers_dbm[point] / 10)
        bers = 0.5 * np.array([math.erfc(math.sqrt(1 / z / 2)) for z in made.inverse_snr(power_w)])
        tributaries = tuple(Tributary(n, each, round(each * b)) for n, b in zip(("XI", "YI"), bers, strict=True))
        taps = {"tap_before_w": 9 * power_w, "tap_after_w": 9 * power_w}
        place = {"point": point, "attempt": attempt, "order": 100 * attempt + point}
        return replace(first, received_power_w=power_w, tributaries=tributaries, **taps, **place)

    return made, tuple(stay(p, a) for a in range(1, passes + 1) for p in range(len(powers_dbm)))


def asked(stays, qpsk, **changes) -> SensitivityRequest:
    return SensitivityRequest(tuple(stays), changes.pop("threshold_ber", 3.8e-3), qpsk, **changes)


def found(stays, qpsk, **changes) -> Sensitivity:
    answer = estimate(asked(stays, qpsk, **changes))
    assert isinstance(answer, Sensitivity), answer
    return answer


def test_noiseless_counts_give_the_truth(design, qpsk) -> None:
    made, stays = expected_counts(design)
    answer = found(stays, qpsk)
    assert answer.received_power_dbm == pytest.approx(made.truth_dbm, abs=1e-4)  # the table of BER is good to 1e-5
    # the least shift of a stay, 0.005 dB, bends the mean BER of the model where these counts have none
    assert answer.curve_b == pytest.approx(made.floor, abs=1e-4)
    ratio_db = 10 * math.log10(answer.curve_a_w[0] / answer.curve_a_w[1])
    assert ratio_db == pytest.approx(made.imbalance_db, abs=1e-3)
    noise = np.array(answer.curve_a_w) / 1e-7 + answer.curve_b
    assert noise == pytest.approx(made.inverse_snr(1e-7), rel=1e-4)


def test_fit_is_the_likelihood_maximum(design, qpsk) -> None:
    """Every stay's shift integrated over 401 plain points, maximised by a simplex that knows no derivative."""
    stays = design(powers_dbm=(-39.4, -38.8, -38.2, -37.6), passes=2, bits=20_000, scatter_db=0.2).night(
        np.random.default_rng(8)
    )
    counts = counts_of(stays, {})
    best = fit(Task(tabulate(qpsk), counts, PHYSICAL, 0.01, 7))
    tau, sides = best.tau_db[0], np.exp(np.array([0.5, -0.5]) * best.imbalance[0])
    shift = np.linspace(-7 * tau, 7 * tau, 401)

    def loss(parameters: np.ndarray) -> float:
        log_a, b = parameters
        relative = np.exp(counts.log_power)[:, None] * 10 ** (shift / 10)
        ber = np.mean([qpsk(-10 * np.log10(np.exp(log_a) * side / relative + b)) for side in sides], axis=0)
        k, n = counts.errors[0].sum(-1)[:, None], counts.bits.sum(-1)[:, None]
        each = (np.exp(binom.logpmf(k, n, ber)) * norm.pdf(shift, 0, tau)).sum(axis=1) * (shift[1] - shift[0])
        return -float(np.log(each).sum())

    start = best.parameters[0, :2] + np.array([0.05, 0.01])
    brute = minimize(loss, start, method="Nelder-Mead", options={"xatol": 1e-7, "fatol": 1e-10, "maxiter": 2000})
    assert best.parameters[0, LN_A] > -5 and brute.success
    # 2e-3 of log a is 0.009 dB along a valley where the likelihood changes by less than 1e-4
    assert best.parameters[0, :2] == pytest.approx(brute.x, abs=2e-3)
    assert loss(best.parameters[0, :2]) == pytest.approx(brute.fun, abs=1e-4)


def test_pooled_ber_is_mean_of_bers(design, qpsk) -> None:
    """An imbalance of 2 dB moves the power for 3.8e-3 by a third of a decibel against the BER of the mean SNR in dB."""
    noise = np.array([10**0.1, 10**-0.1])

    def excess(power: float) -> float:
        return float(np.mean(qpsk(-10 * np.log10(noise / power)))) - 3.8e-3

    pooled_db = 10 * math.log10(brentq(excess, 1.0, 100.0))
    balanced_db = brentq(lambda snr_db: float(qpsk(snr_db)) - 3.8e-3, 0.0, 20.0)
    assert pooled_db - balanced_db == pytest.approx(0.34, abs=0.005)
    stays = design(imbalance_db=2.0, floor=0.0).night(np.random.default_rng(2))
    assert found(stays, qpsk).received_power_dbm == pytest.approx(-38.5, abs=0.05)


def test_common_part_is_added_once(design, qpsk) -> None:
    stays = design().night(np.random.default_rng(3))
    common = (
        BudgetLine("a", "B", 0.06, None, ""),
        BudgetLine("b", "B", 0.08, None, ""),
        BudgetLine("c", "B", None, None, ""),
    )
    plain, total = found(stays, qpsk), found(stays, qpsk, common=common)
    assert total.u_common_db == pytest.approx(0.1)
    assert total.statistical_low_dbm == plain.statistical_low_dbm
    u_db = math.hypot(0.1, plain.u_statistical_db)
    assert total.high_dbm - total.received_power_dbm == pytest.approx(1.96 * u_db, rel=0.01)
    lines = budget(asked(stays, qpsk, common=common), total)
    assert [line.u_db for line in lines[1:]] == [0.06, 0.08, None]


def test_meter_zero_acts_in_watts(design, qpsk) -> None:
    made, stays = expected_counts(design)
    zero_w = 20e-9  # at the meter, which sees nine times the plane's power
    answer = found(stays, qpsk, meter_zero_u_w=zero_w)
    # at the crossing the curve moves by those watts; a/P + b cannot follow the moved powers exactly: 5 %
    expected_db = 10 / math.log(10) * zero_w / 9 / (1e-3 * 10 ** (made.truth_dbm / 10))
    assert answer.u_common_db == pytest.approx(expected_db, rel=0.05)
    (_, line) = budget(asked(stays, qpsk, meter_zero_u_w=zero_w), answer)
    assert line.u_db == pytest.approx(answer.u_common_db)


def test_interval_is_students(design, qpsk) -> None:
    answer = found(design().night(np.random.default_rng(3)), qpsk)
    half_db = answer.statistical_high_dbm - answer.received_power_dbm
    assert half_db == pytest.approx(t.ppf(0.975, 27 - 2) * answer.u_statistical_db)
    assert "27 stays" in answer.method and "only" not in answer.method


def test_more_bits_do_not_average_shifts_down(design, qpsk) -> None:
    few = found(design(bits=400_000, scatter_db=0.1).night(np.random.default_rng(6)), qpsk)
    many = found(design(bits=40_000_000, scatter_db=0.1).night(np.random.default_rng(6)), qpsk)
    assert many.u_statistical_db > 0.6 * few.u_statistical_db
    assert many.stay_scatter_db == pytest.approx(0.1, rel=0.35)  # 25 degrees of freedom: 14 % standard uncertainty


def test_scatter_is_never_below_the_reading(design, qpsk) -> None:
    _, stays = expected_counts(design)
    noisy = [replace(stay, received_power_u_db=0.03) for stay in stays]
    assert found(noisy, qpsk).stay_scatter_db == pytest.approx(0.03)


def test_few_stays_say_so(design, qpsk) -> None:
    stays = design(powers_dbm=SHAPE, passes=1).night(np.random.default_rng(3))
    answer = found(stays, qpsk)
    assert "only 6 stays in 1 passes" in answer.method
    assert answer.statistical_high_dbm - answer.received_power_dbm > 2.7 * answer.u_statistical_db


def test_boundary_takes_the_bootstrap(design, qpsk) -> None:
    random = np.random.default_rng(1)
    nights = [design(floor=0.0).night(random) for _ in range(6)]
    answers = [found(stays, qpsk, seed=5) for stays in nights]
    on_bound = [a for a in answers if a.curve_b == 0.0]
    assert 0 < len(on_bound) < 6
    assert all("bootstrap" in a.method for a in on_bound)
    again = next(stays for stays, a in zip(nights, answers, strict=True) if a.curve_b == 0.0)
    assert found(again, qpsk, seed=5) == on_bound[0]
    assert found(again, qpsk, seed=6) != on_bound[0]


def test_order_of_stays_does_not_matter(design, qpsk) -> None:
    stays = design().night(np.random.default_rng(3))
    assert found(stays[::-1], qpsk).received_power_dbm == pytest.approx(found(stays, qpsk).received_power_dbm, abs=1e-6)


def test_one_sided_powers_are_extrapolated(design, qpsk) -> None:
    inside = design(powers_dbm=SHAPE).night(np.random.default_rng(3))
    weak = design(powers_dbm=(-40.5, -40.1, -39.7, -39.3)).night(np.random.default_rng(3))
    assert not found(inside, qpsk).extrapolated
    assert found(weak, qpsk).extrapolated


def test_wrong_shape_gets_a_labelled_local_fit(design, qpsk) -> None:
    """Noise that grows twice as fast towards low power as any receiver's: the model cannot follow, and says so."""
    wrong = design(drift=lambda power_w: (power_w / 10**-6.85) ** -0.8, scatter_db=0.02, bits=4_000_000)
    answer = found(wrong.night(np.random.default_rng(3)), qpsk)
    truth_w = brentq(lambda p: float(np.mean(qpsk(-10 * np.log10(wrong.inverse_snr(p))))) - 3.8e-3, 1e-8, 1e-6)
    assert "local two-parameter fit" in answer.method
    assert answer.received_power_dbm == pytest.approx(10 * math.log10(truth_w / 1e-3), abs=0.03)
    assert answer.goodness_of_fit_p is None or answer.goodness_of_fit_p > 0.01


def test_good_shape_is_seldom_rejected(design, qpsk) -> None:
    random = np.random.default_rng(9)
    local = sum("local" in found(design().night(random), qpsk).method for _ in range(100))
    assert local <= 5  # expected 1; six or more has a probability of 5e-4


def test_following_range_uses_known_converter_noise(design, qpsk) -> None:
    made, stays = expected_counts(design)
    known, noisy = {}, []
    for stay in stays:
        extra = 0.01 * (1 + stay.point % 3)
        bers = [float(qpsk(-10 * math.log10(z + extra))) for z in made.inverse_snr(stay.received_power_w)]
        tributaries = tuple(Tributary(n, 10**9, round(1e9 * b)) for n, b in zip(("XI", "YI"), bers, strict=True))
        noisy.append(replace(stay, tributaries=tributaries))
        known[stay.point, stay.attempt] = extra
    with_it = found(noisy, qpsk, vertical="follow", converter_noise=known)
    assert with_it.received_power_dbm == pytest.approx(made.truth_dbm, abs=1e-3)
    assert with_it.curve_b == pytest.approx(made.floor, abs=1e-4)
    assert "counted in b" in found(noisy, qpsk, vertical="follow").method


def test_residue_is_recovered(design, qpsk) -> None:
    made, stays = expected_counts(design)
    per_w = 5e4
    bent = []
    for stay in stays:
        bers = [
            float(qpsk(-10 * math.log10(z + per_w * stay.received_power_w)))
            for z in made.inverse_snr(stay.received_power_w)
        ]
        tributaries = tuple(Tributary(n, 10**9, round(1e9 * b)) for n, b in zip(("XI", "YI"), bers, strict=True))
        bent.append(replace(stay, tributaries=tributaries))
    answer = found(bent, qpsk, with_residue=True)
    assert answer.curve_c_per_w == pytest.approx(per_w, rel=0.02)
    assert answer.curve_b == pytest.approx(made.floor, abs=5e-4)


def test_single_polarisation_has_one_a(design, qpsk) -> None:
    _, stays = expected_counts(design)
    one = [replace(s, tributaries=(Tributary("I", 10**8, s.tributaries[0].errors // 10),)) for s in stays]
    assert len(found(one, qpsk).curve_a_w) == 1


def test_two_powers_give_a_reason(design, qpsk) -> None:
    answer = estimate(asked(design(powers_dbm=(-39.0, -38.0), passes=1).night(np.random.default_rng(1)), qpsk))
    assert isinstance(answer, Reason) and "2 stays at 2 powers" in answer.words


def test_floor_above_threshold_gives_a_reason(design, qpsk) -> None:
    stays = design(floor=0.16, truth_dbm=-38.5, threshold_ber=2e-2, powers_dbm=(-39, -38, -36, -33, -30)).night(
        np.random.default_rng(1)
    )
    answer = estimate(asked(stays, qpsk, threshold_ber=1e-3))
    assert isinstance(answer, Reason) and "levels off" in answer.words


def test_rising_counts_give_a_reason_or_local_doubt(design, qpsk) -> None:
    stays = design().night(np.random.default_rng(1))
    powers = {s.point: s.received_power_w for s in stays}
    mirrored = [replace(s, received_power_w=powers[8 - s.point]) for s in stays]
    assert isinstance(estimate(asked(mirrored, qpsk)), Reason)


def test_stays_without_lock_enter_nothing(design, qpsk) -> None:
    stays = design().night(np.random.default_rng(4))
    lost = replace(stays[0], tributaries=(), captures_locked=0)
    before, after = found(stays, qpsk), found((*stays[1:], lost), qpsk)
    # the whole point becomes doubtful: its other two stays are those that happened to lock
    assert "27 stays at 9" in before.method
    assert "24 stays at 8" in after.method


def test_nothing_gives_a_reason(qpsk) -> None:
    assert isinstance(estimate(asked((), qpsk)), Reason)
