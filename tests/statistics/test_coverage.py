"""Do the two 95 % intervals contain the truth as often as they say? Nights of counts, the package's own estimate."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import binomtest

from owlight.statistics import SensitivityRequest, estimate
from owlight.vocabulary.result import BudgetLine, Sensitivity

CERTIFICATE_DB, PLANE_MINUS_TAP_DB, ZERO_W = 0.05, 0.06, 5e-9
COMMON = (
    BudgetLine("certificate of the power meter", "B", CERTIFICATE_DB, None, ""),
    BudgetLine("plane minus tap", "B", PLANE_MINUS_TAP_DB, None, ""),
    BudgetLine("connector mating", "B", None, None, "not assessed"),
)
FULL = {}
POOR = {"powers_dbm": (-39.3, -38.8, -38.2, -37.7), "passes": 2}


def study(design, misread_night, qpsk, nights, seed) -> dict[str, float]:
    """The statistical interval on a meter without common error, the total one with errors drawn from the stated u."""
    random = np.random.default_rng(seed)
    inside, errors_db, widths_db = np.zeros(2, dtype=int), [], []
    for night in range(nights):
        stays = design.night(random)
        common_db = random.normal(0.0, CERTIFICATE_DB) + random.normal(0.0, PLANE_MINUS_TAP_DB)
        wrong = misread_night(stays, common_db, random.normal(0.0, ZERO_W))
        plain = estimate(SensitivityRequest(stays, design.threshold_ber, qpsk, seed=night))
        total = estimate(SensitivityRequest(wrong, design.threshold_ber, qpsk, COMMON, ZERO_W, seed=night))
        assert isinstance(plain, Sensitivity) and isinstance(total, Sensitivity), (plain, total)
        inside[0] += plain.statistical_low_dbm <= design.truth_dbm <= plain.statistical_high_dbm
        inside[1] += total.low_dbm <= design.truth_dbm <= total.high_dbm
        errors_db.append(plain.received_power_dbm - design.truth_dbm)
        widths_db.append((plain.u_statistical_db, np.hypot(total.u_statistical_db, total.u_common_db)))
    u_db = np.mean(widths_db, axis=0)
    return {
        "statistical": inside[0] / nights,
        "total": inside[1] / nights,
        "p_statistical": binomtest(int(inside[0]), nights, 0.95).pvalue,
        "p_total": binomtest(int(inside[1]), nights, 0.95).pvalue,
        "mean_error_db": float(np.mean(errors_db)),
        "scatter_db": float(np.std(errors_db)),
        "u_statistical_db": float(u_db[0]),
        "u_total_db": float(u_db[1]),
    }


def hold(found: dict[str, float]) -> None:
    print(found)
    assert found["p_statistical"] > 0.01
    assert found["p_total"] > 0.01
    assert abs(found["mean_error_db"]) < 0.02


@pytest.mark.parametrize("changes", [FULL, POOR], ids=["27 stays", "8 stays in 2 passes"])
def test_intervals_cover_the_truth(changes, design, misread_night, qpsk) -> None:
    hold(study(design(**changes), misread_night, qpsk, 150, 11))


@pytest.mark.long
@pytest.mark.parametrize(
    "changes",
    [FULL, POOR, {"floor": 0.0}, {"floor": 0.03}, {**POOR, "scatter_db": 0.1}],
    ids=["27 stays", "8 stays in 2 passes", "no floor", "high floor", "8 stays, scattered"],
)
def test_thousand_nights_cover_the_truth(changes, design, misread_night, qpsk) -> None:
    hold(study(design(**changes), misread_night, qpsk, 1000, 2027))
