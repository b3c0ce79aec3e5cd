"""Pooled readings are what the single readings give."""

from __future__ import annotations

import numpy as np
import pytest

from owlight.statistics import mean_readings
from owlight.vocabulary.values import Reading, Stamp, Term

METER, DIODE = Term("power_meter", "power"), Term("receiver", "photocurrent")


def reading(term: Term, singles: np.ndarray) -> Reading:
    sd = float(np.std(singles, ddof=1)) if len(singles) > 1 else None
    return Reading(Stamp("", 0.0, 1), term, float(np.mean(singles)), sd, len(singles))


def test_parts_pool_to_the_whole() -> None:
    """However single readings are parted, mean and deviation are NumPy's of all of them."""
    rng = np.random.default_rng(5)
    parts = [rng.normal(2e-5 + shift, 1e-7, size) for shift, size in ((0.0, 5), (3e-7, 1), (-1e-7, 12))]
    mean, other = mean_readings(
        [reading(METER, parts[0]), reading(DIODE, parts[1]), *map(reading, [METER] * 2, parts[1:])]
    )
    every = np.concatenate(parts)
    assert (mean.term, mean.count, other.term) == (METER, 18, DIODE)
    # both are double arithmetic over 18 values
    assert mean.value == pytest.approx(np.mean(every), rel=1e-12)
    assert mean.standard_deviation == pytest.approx(np.std(every, ddof=1), rel=1e-9)


def test_scatter_of_one_is_not_told() -> None:
    one = Reading(Stamp("", 0.0, 1), METER, 1e-6)
    bare = Reading(Stamp("", 0.0, 1), METER, 1e-6, None, 5)
    assert mean_readings([one])[0].standard_deviation is None
    assert mean_readings([one, bare])[0].standard_deviation is None


def test_no_number_counts_for_nothing() -> None:
    dark, lit = Reading(Stamp("", 0.0, 1), METER, None), Reading(Stamp("", 0.0, 2), METER, 3e-6)
    assert mean_readings([dark])[0].value is None and mean_readings([dark])[0].count == 0
    assert mean_readings([dark, lit])[0].value == 3e-6 and mean_readings([dark, lit])[0].count == 1
    assert mean_readings([]) == ()
