"""Scales, the fitted curve, and markup."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from owlight.logbook.read import curve, open_reader
from owlight.report.drawing import Axis
from owlight.report.fitted import deviation_db, fitted_ber
from owlight.report.markup import element
from owlight.vocabulary.result import Sensitivity


@pytest.fixture(scope="module")
def found(told: Any) -> Sensitivity:
    with open_reader(told.folder) as reader:
        conclusion = curve.conclusion(reader, told.run_id)
    assert conclusion is not None
    return conclusion.sensitivities[0]


@given(low=st.floats(-100, 100), length=st.floats(1e-3, 1e4), most=st.integers(2, 12))
def test_ticks_are_few_and_inside(low: float, length: float, most: int) -> None:
    axis = Axis(low, low + length, 0.0, 100.0)
    ticks = axis.ticks(most)
    assert len(ticks) <= most + 1
    # ticks are rounded to 1e-10
    assert all(low - 1e-6 * length - 1e-9 <= tick <= low + length * (1 + 1e-6) + 1e-9 for tick in ticks)
    assert np.allclose(np.diff(ticks, 2), 0.0, atol=1e-8)


def test_axis_maps_its_ends() -> None:
    axis = Axis(-40.0, -36.0, 60.0, 700.0)
    assert axis.at(-40.0) == 60.0 and axis.at(-36.0) == 700.0 and axis.at(-38.0) == 380.0


def test_curve_meets_threshold_at_sensitivity(found: Sensitivity) -> None:
    ber = fitted_ber(found, "QPSK", np.array([found.received_power_dbm]))[0]
    # the estimate solves for this crossing on a table of the formula that is good to 1e-5
    assert ber == pytest.approx(3.8e-3, rel=1e-4)


@pytest.mark.parametrize("shift_db", [-0.2, 0.0, 0.35])
def test_deviation_is_the_shift_of_power(found: Sensitivity, shift_db: float) -> None:
    power_dbm = found.received_power_dbm + 0.3
    ber = fitted_ber(found, "QPSK", np.array([power_dbm - shift_db]))[0]
    # linear between powers 0.01 dB apart
    assert deviation_db(found, "QPSK", power_dbm, float(ber)) == pytest.approx(shift_db, abs=1e-4)


def test_deviation_off_the_curve_is_none(found: Sensitivity) -> None:
    assert deviation_db(found, "QPSK", found.received_power_dbm, 0.49) is None


def test_only_markup_passes_unescaped() -> None:
    inner = element("b", "a & b")
    assert element("p", inner, "<i>", title='"') == '<p title="&quot;"><b>a &amp; b</b>&lt;i&gt;</p>'
