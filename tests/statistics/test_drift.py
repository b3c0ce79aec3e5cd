"""A drift and its uncertainty against a general library's regression."""

import math

import numpy as np
import pytest
from scipy.stats import linregress

from owlight.statistics.drift import slope
from owlight.vocabulary.values import Reading, Stamp, Term


def readings(levels_dbm, every_s=30.0):
    made = []
    for number, level in enumerate(levels_dbm):
        value = None if level is None else 1e-3 * 10 ** (level / 10)
        made.append(Reading(Stamp("", number * every_s, number), Term("power_meter", "power"), value))
    return made


def test_drift_equals_linear_regression() -> None:
    levels = -30 + 0.01 * np.arange(12) + np.random.default_rng(4).normal(0, 0.02, 12)
    drift_db, u_db = slope(readings(levels), 300.0)
    expected = linregress(np.arange(12) * 30.0, levels)
    assert drift_db == pytest.approx(expected.slope * 300)
    assert u_db == pytest.approx(expected.stderr * 300)


@pytest.mark.parametrize("levels", [[-30.0, -30.0], [-30.0, None, -30.0, -30.0], []])
def test_unknown_drift_is_infinite(levels) -> None:
    assert slope(readings(levels), 300.0) == (math.inf, math.inf)
