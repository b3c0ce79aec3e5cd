"""What is concluded from the counts, and what is left unsaid."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest

from owlight.bench import Bench
from owlight.jobs import conclude
from owlight.jobs.planning import plan_of
from owlight.jobs.resolve import resolve
from owlight.statistics import SensitivityRequest, estimate
from owlight.theory import ber_of_snr_db, predicted_sensitivity_dbm
from owlight.vocabulary.captures import Tributary
from owlight.vocabulary.plan import Plan
from owlight.vocabulary.result import Sensitivity, Stay


@pytest.fixture(scope="module")
def paper() -> Bench:
    return resolve("qpsk_sensitivity", "bench").bench


@pytest.fixture(scope="module")
def plan() -> Plan:
    return plan_of(resolve("qpsk_sensitivity", "bench"))


def curve(group: str) -> tuple[SensitivityRequest, Sensitivity]:
    """Nine stays without scatter on 1/SNR = a/P, two passes, so that a sensitivity follows."""
    a_w = 2.2e-8
    stays = []
    for order in range(18):
        power_w = 1e-7 * 10 ** (0.05 * (order % 9))
        ber = float(ber_of_snr_db("QPSK")(10 * math.log10(power_w / a_w)))
        counted = tuple(Tributary(name, 100_000, round(ber * 100_000)) for name in ("XI", "XQ", "YI", "YQ"))
        stays.append(
            Stay(order % 9, order // 9 + 1, order, group, False, "pass", power_w, 1e-3, None, None, counted, 1, 1)
        )
    request = SensitivityRequest(tuple(stays), 3.8e-3, ber_of_snr_db("QPSK"))
    found = estimate(request)
    assert isinstance(found, Sensitivity)
    return request, found


def test_prediction_needs_the_rejection(plan: Plan, paper: Bench) -> None:
    """Without it the residual intensity noise is a guess: taken as unbalanced it would shift the figure by 10 dB."""
    assert conclude._belief(plan, paper, "") is not None
    unknown = replace(paper, receiver=replace(paper.receiver, common_mode_rejection_db=None))
    assert conclude._belief(plan, unknown, "") is None
    quiet = replace(unknown, receiver=replace(unknown.receiver, lo_intensity_noise_db_per_hz=None))
    belief = conclude._belief(plan, quiet, "")
    assert belief is not None
    with_noise = conclude._belief(plan, paper, "")
    assert with_noise is not None
    quieter_dbm, noisy_dbm = (predicted_sensitivity_dbm(b, "QPSK", 3.8e-3, 32e9) for b in (belief, with_noise))
    assert quieter_dbm < noisy_dbm < quieter_dbm + 1.0  # balanced by 20 dB it costs tenths of a decibel


def test_each_curve_has_its_own_budget() -> None:
    alone, grouped = (conclude._budget(*curve(group)) for group in ("", "lo_power 9 dBm"))
    assert alone[0].component == "counts and scatter of stays"
    assert [line.component for line in grouped] == [f"{line.component} (lo_power 9 dBm)" for line in alone]


def test_penalties_name_what_they_are_held_against(plan: Plan, paper: Bench) -> None:
    found = curve("")[1]
    shot, predicted = conclude._penalties(plan, paper, found)
    assert "shot-noise limit" in shot.reference and "bench file" in predicted.reference
    # DP-QPSK at 3.8e-3 and 32 GBd: 7.1254 photons a symbol and polarisation at 1550.12 nm (closed form)
    assert shot.reference_dbm == pytest.approx(-42.333, abs=1e-3)
    assert shot.penalty_db == pytest.approx(found.received_power_dbm - shot.reference_dbm)
