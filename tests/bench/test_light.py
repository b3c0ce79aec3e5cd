"""Worst cases, limits and the order that makes dark."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from owlight.bench import (
    Bench,
    LightState,
    attenuation_for,
    common_uncertainty,
    fixed_pad_words,
    lo_laser_power_dbm,
    lowest_received_power_dbm,
    read_bench,
    received_power_dbm,
    refuse_if_over,
    safe_settings,
    worst_case,
)
from owlight.bench.model import LO_INPUT, METER, PHOTODIODE, SIGNAL_INPUT, Limit
from owlight.errors import SafetyRefusal
from owlight.quantity import watts

TEXT = (Path(__file__).parents[2] / "simulated_instruments" / "bench.toml").read_text("utf-8")
VALUE = read_bench(TEXT, "bench.toml").value
assert VALUE is not None
BENCH: Bench = VALUE
SET = LightState(True, 10.0, True, 13.0, 24.4)


def powers(state: LightState, bench: Bench = BENCH) -> dict[str, float]:
    return {power.plane: power.power_dbm for power in worst_case(bench, state)}


def without_losses() -> Bench:
    path = replace(
        BENCH.light_path,
        transmitter_least_loss_db=0.0,
        attenuator_insertion_least_db=0.0,
        attenuator_accuracy_db=0.0,
        tap_to_receiver_least_loss_db=0.0,
        lo_least_loss_db=0.0,
    )
    exact = {name: replace(role, power_tolerance_db=0.0) for name, role in BENCH.role.items()}
    return replace(BENCH, light_path=path, role=exact)


def test_diode_sees_the_crest_of_the_beat() -> None:
    # 13 dBm of LO over 8 diodes is 2.494 mW, 0 dBm in one polarisation over 4 is 0.25 mW. Fields add (interference of
    # two waves, e.g. Saleh and Teich, Fundamentals of Photonics, chapter 2): 4.32 mW, not the sum of 2.74 mW.
    found = powers(LightState(True, 0.0, True, 13.0, 0.0), without_losses())
    lo_mw, signal_mw = 10**1.3 / 8, 1 / 4
    assert watts(found[PHOTODIODE]) * 1e3 == pytest.approx(lo_mw + signal_mw + 2 * math.sqrt(lo_mw * signal_mw))
    assert watts(found[PHOTODIODE]) * 1e3 == pytest.approx(4.32, abs=0.01)


def test_worst_case_is_upper_tolerance_and_least_loss() -> None:
    # by hand: 10 + 0.5 - 10 - 0 - 1 - (24.4 - 0.3) - 9.6, and 13 + 0.5 - 0.7
    found = powers(SET)
    assert found[SIGNAL_INPUT] == pytest.approx(-34.2)
    assert found[METER] == pytest.approx(-25.0)
    assert found[LO_INPUT] == pytest.approx(12.8)


@settings(max_examples=60, deadline=None, derandomize=True)
@given(
    st.booleans(), st.floats(-10, 13), st.booleans(), st.floats(-10, 16), st.floats(0, 60), st.sets(st.integers(0, 4))
)
def test_unknown_is_never_safer(on: bool, power: float, lo_on: bool, lo: float, loss: float, hide: set[int]) -> None:
    known = (on, power, lo_on, lo, loss)
    hidden = [None if place in hide else value for place, value in enumerate(known)]
    certain, unsure = powers(LightState(*known)), powers(LightState(*hidden))  # type: ignore[arg-type]
    assert all(unsure[plane] >= power_dbm - 1e-9 for plane, power_dbm in certain.items())


def test_one_laser_in_two_roles_lights_both() -> None:
    """A laser that carries the data and is the local oscillator too: its output is on for both or for none."""
    lo = replace(BENCH.role["local_oscillator"], serial_number=BENCH.role["signal_laser"].serial_number)
    one = replace(BENCH, role={**BENCH.role, "local_oscillator": lo})
    both = powers(LightState(True, 12.0, True, 12.0, 24.4), one)
    assert powers(LightState(True, 12.0, False, 12.0, 24.4), one) == both
    assert powers(LightState(False, 7.0, True, 12.0, 24.4), one) == both
    # a power that is not known of either role may be the highest: 16 + 0.5 - 0.7
    assert powers(LightState(True, 7.0, False, None, 24.4), one)[LO_INPUT] == pytest.approx(15.8)
    assert powers(LightState(False, 12.0, False, 12.0, 24.4), one) == {}
    assert LO_INPUT not in powers(LightState(True, 12.0, False, 12.0, 24.4))  # two lasers


def test_dark_sources_reach_no_plane() -> None:
    assert powers(LightState(signal_on=False, lo_on=False)) == {}


def test_demo_bench_bears_the_unknown_state() -> None:
    refuse_if_over(BENCH, LightState())


@pytest.mark.parametrize(
    ("plane", "highest_dbm"), [(SIGNAL_INPUT, -34.3), (LO_INPUT, 12.7), (PHOTODIODE, 3.0), (METER, -25.1)]
)
def test_refusal_names_plane_limit_power_and_point(plane: str, highest_dbm: float) -> None:
    strict = replace(BENCH, limit={**BENCH.limit, plane: Limit(highest_dbm)})
    with pytest.raises(SafetyRefusal) as caught:
        refuse_if_over(strict, SET, point=7)
    words = str(caught.value)
    computed = f"{powers(SET)[plane]:.2f} dBm"
    assert all(part in words for part in (plane, computed, f"{highest_dbm:.2f} dBm", "Point 7"))


def test_limit_itself_is_allowed() -> None:
    limits = {plane: Limit(power) for plane, power in powers(SET).items()}
    refuse_if_over(replace(BENCH, limit=limits), SET)


@settings(max_examples=40, deadline=None, derandomize=True)
@given(st.floats(-20.0, -8.0))
def test_advised_pad_is_just_enough(highest_dbm: float) -> None:
    strict = replace(BENCH, limit={**BENCH.limit, SIGNAL_INPUT: Limit(highest_dbm)})
    words = fixed_pad_words(strict, SET)
    open_dbm = powers(replace(SET, attenuation_db=0.0))[SIGNAL_INPUT]
    if not words:
        assert open_dbm <= highest_dbm
        return
    pad_db = int(words.rsplit(" ", 2)[1])
    assert open_dbm - pad_db <= highest_dbm < open_dbm - pad_db + 1


def test_pad_cannot_cure_local_oscillator() -> None:
    strict = replace(BENCH, limit={**BENCH.limit, LO_INPUT: Limit(0.0)})
    assert "less local oscillator power" in fixed_pad_words(strict, SET)


@settings(max_examples=40, deadline=None, derandomize=True)
@given(st.floats(-45.0, -20.0), st.floats(0.0, 13.0))
def test_attenuation_leads_to_the_power_asked(received_dbm: float, laser_dbm: float) -> None:
    attenuation_db = attenuation_for(BENCH, received_dbm, laser_dbm)
    path = BENCH.light_path
    losses_db = (
        path.transmitter_loss_db + path.fixed_pad_db + path.attenuator_insertion_db + path.tap_to_receiver_loss_db
    )
    assert laser_dbm - losses_db - attenuation_db == pytest.approx(received_dbm, abs=1e-9)


def test_only_the_calibration_converts_readings() -> None:
    other = replace(BENCH, light_path=replace(BENCH.light_path, tap_to_meter_loss_db=3.0, tap_to_receiver_loss_db=12.0))
    assert received_power_dbm(BENCH, 1e-6) == received_power_dbm(other, 1e-6) == pytest.approx(-39.54)
    with pytest.raises(ValueError):
        received_power_dbm(BENCH, -1e-12)


def test_lowest_power_is_ten_floors() -> None:
    lowest_dbm = lowest_received_power_dbm(BENCH)
    assert lowest_dbm is not None
    assert watts(lowest_dbm - BENCH.plane_minus_tap.value_db) == pytest.approx(10 * watts(-75.0))


def test_lo_laser_makes_up_its_path() -> None:
    assert lo_laser_power_dbm(BENCH, 12.0) == 13.0


def test_dark_begins_with_the_attenuator() -> None:
    assert [(role, setting.value) for role, setting in safe_settings(BENCH)] == [
        ("attenuator", 60.0),
        ("signal_laser", False),
        ("local_oscillator", False),
    ]


def test_unassessed_component_is_not_zero() -> None:
    lines = {line.component: line.u_db for line in common_uncertainty(BENCH)}
    assert lines["power meter certificate"] == 0.05 and lines["plane minus tap"] == 0.03
    bare = replace(BENCH, plane_minus_tap=replace(BENCH.plane_minus_tap, mating_u_db=None))
    assert {line.component: line.u_db for line in common_uncertainty(bare)}["connector mating"] is None
