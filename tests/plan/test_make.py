"""Limits, fit and figures of a plan."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import pytest

from owlight.bench.model import LO_INPUT, METER, PHOTODIODE, SIGNAL_INPUT
from owlight.driver import Driver
from owlight.errors import InputError, SafetyRefusal
from owlight.plan import forecast
from owlight.plan.safe_steps import spoken_setting
from owlight.vocabulary.plan import Plan
from owlight.vocabulary.terms import LO_POWER
from owlight.vocabulary.values import Setting, Term

PlanOf = Callable[..., Plan]
TO = 'to = "-36 dBm"'


def test_shipped_sequences_fit_the_demo_bench(plan_of: PlanOf) -> None:
    for name in ("qpsk_sensitivity", "lo_power_map", "power_log"):
        assert plan_of(name).points


def test_point_over_limit_is_refused_by_name(plan_of: PlanOf) -> None:
    with pytest.raises(SafetyRefusal) as caught:
        plan_of("qpsk_sensitivity", {TO: 'to = "6 dBm"'})
    # 46 dB in steps of 0.5 dB: the last is point 92. On the 6 dBm come 0.5 dB tolerance of the laser, 2 dB less loss
    # of the transmitter, 0.5 dB less insertion loss, 0.5 dB less loss after the tap; no attenuation is left to be wrong
    words = str(caught.value)
    assert "Point 92 (received_power 6 dBm): " in words
    # 10 dBm of laser less 23.6 dB of loss leave -13.6 dBm with the attenuator at its least
    assert "attenuator at 0.00 dB and 19.60 dB more light asked for than it would pass" in words
    assert "at -" not in words
    assert "the receiver signal input could see 9.50 dBm, above its limit of 3.00 dBm" in words


def test_lo_over_limit_is_refused(plan_of: PlanOf) -> None:
    with pytest.raises(SafetyRefusal, match=r"the receiver LO input could see 18\.80 dBm, above its limit of 17\.00"):
        plan_of("qpsk_sensitivity", {'lo_power = "12 dBm"': 'lo_power = "18 dBm"'})


def test_condition_is_judged_like_a_point(plan_of: PlanOf) -> None:
    with pytest.raises(SafetyRefusal, match="receiver signal input"):
        plan_of("qpsk_sensitivity", {'at = { received_power = "-36 dBm" }': 'at = { received_power = "2 dBm" }'})


@pytest.mark.parametrize(
    ("changes", "bench", "words"),
    [
        ({TO: 'to = "-13 dBm"'}, {}, "ask for -13.5 dBm to -13 dBm; the attenuator reaches -73.60 to -13.60 dBm"),
        ({}, {'floor = "-75 dBm"': 'floor = "-40 dBm"'}, "point 0 asks for -40 dBm; the tap measures from -39.54 dBm"),
        ({'"signal_laser.wavelength" = "1550.12 nm"': '"signal_laser.wavelength" = "1560 nm"'}, {},
         "1560 nm is outside the calibration, 1550.12 nm within 5 nm"),
        ({'"signal_laser.power" = "10 dBm"': '"signal_laser.power" = "14 dBm"'}, {},
         "signal_laser.power: 14 dBm is above the bench's highest_power of 13 dBm"),
        ({'reference_plane = "receiver signal input"': 'reference_plane = "tap input"'}, {}, "not the plane that"),
    ],
)  # fmt: skip
def test_misfit_is_an_input_error(plan_of: PlanOf, changes: dict[str, str], bench: dict[str, str], words: str) -> None:
    with pytest.raises(InputError) as caught:
        plan_of("qpsk_sensitivity", changes, bench)
    assert words in str(caught.value)


def test_sweep_out_of_range_is_one_line(plan_of: PlanOf) -> None:
    """However many points are wrong: which, what they ask for, and what is possible."""
    sweep = '[[sweep]]\nsetting = "signal_laser.wavelength"\nfrom = "1556 nm"\nto = "1560 nm"\nstep = "1 nm"\n\n'
    changes = {"[[sweep]]": sweep + "[[sweep]]", '"signal_laser.wavelength" = "1550.12 nm"': ""}
    changes["every = 9"] = 'every = 9\n"signal_laser.wavelength" = "1556 nm"'
    with pytest.raises(InputError) as caught:
        plan_of("qpsk_sensitivity", changes)
    (wavelength,) = caught.value.problems
    assert wavelength.key == "signal_laser.wavelength"
    assert wavelength.words.startswith("5 values from 1556 nm to 1560 nm are outside the calibration")
    with pytest.raises(InputError) as caught:
        plan_of("qpsk_sensitivity", {'from = "-40 dBm"': 'from = "-90 dBm"'})
    attenuator, tap = caught.value.problems
    assert attenuator.key == tap.key == "sweep[1]"
    # in steps of 0.5 dB point 32 is at -74 dBm, the last below what 60 dB of attenuation leave
    assert attenuator.words == "points 0 to 32 ask for -90 dBm to -74 dBm; the attenuator reaches -73.60 to -13.60 dBm"
    assert tap.words.endswith("ten times the meter's floor")


def test_highest_powers_show_open_attenuator(plan_of: PlanOf) -> None:
    powers = plan_of("qpsk_sensitivity").highest_power
    assert [power.plane for power in powers] == [SIGNAL_INPUT, METER, LO_INPUT, PHOTODIODE] * 2
    planned, opened = powers[:4], powers[4:]
    assert {power.point for power in planned if power.plane != LO_INPUT} <= {None, 8}
    assert planned[0].power_dbm == pytest.approx(-36 + 0.5 + 2 + 0.5 + 0.5 + 0.3)
    # 10 + 0.5 - 10 - 1 - 9.6
    assert opened[0].power_dbm == pytest.approx(-10.1)
    assert all(power.power_dbm <= power.limit_dbm for power in powers)


OPEN = {'highest = "3 dBm"': 'highest = "-20 dBm"'}
ALONE = {"[stop]": '[unattended]\nat_most = "10 h"\n[stop]'}


def test_unattended_run_wants_the_pad(plan_of: PlanOf) -> None:
    assert "fit a fixed pad of at least 10 dB" in plan_of("qpsk_sensitivity", {}, OPEN).highest_power[4].situation
    with pytest.raises(SafetyRefusal, match="fit a fixed pad of at least 10 dB"):
        plan_of("qpsk_sensitivity", ALONE, OPEN)
    accepted = {'at_most = "14 h"': 'at_most = "14 h"\naccepts_open_attenuator = "the head of the laboratory"'}
    assert plan_of("qpsk_sensitivity", ALONE, OPEN | accepted).points
    assert plan_of("qpsk_sensitivity", ALONE).points


def test_unattended_run_wants_permission_and_time(plan_of: PlanOf) -> None:
    with pytest.raises(SafetyRefusal, match=r"may be left alone for 0\.1 h only"):
        plan_of("qpsk_sensitivity", {"[stop]": '[unattended]\nat_most = "6 min"\n[stop]'})
    gone = '[unattended]\nauthorised_by = "nobody: this bench is simulated"\n'
    gone += 'contact = "nobody: this bench is simulated"\nat_most = "14 h"'
    with pytest.raises(SafetyRefusal, match=r"has no \[unattended\]"):
        plan_of("qpsk_sensitivity", ALONE, {gone: ""})


def test_record_holds_the_symbols_asked(plan_of: PlanOf) -> None:
    capture = plan_of("qpsk_sensitivity").capture
    assert capture is not None
    # 80 GS/s at 32 GBd is 2.5 samples a symbol
    assert 250_000 < capture.record_length < 257_000 and capture.record_length % 256 == 0
    assert capture.lanes == ("XI", "XQ", "YI", "YQ")


def test_settings_end_with_light(plan_of: PlanOf) -> None:
    settings = plan_of("power_log").settings
    assert settings[-1] == Setting(Term("signal_laser", "output"), True)
    terms = [setting.term for setting in plan_of("qpsk_sensitivity").settings]
    assert terms.index(Term("pattern_source", "output")) < terms.index(Term("signal_laser", "wavelength"))
    assert terms[-1] == LO_POWER


def test_offsets_are_settled_in_plan(plan_of: PlanOf) -> None:
    plan = plan_of("qpsk_sensitivity")
    assert plan.signal is not None
    assert len(set(plan.signal.tributary_offsets)) == 4
    assert Setting(Term("pattern_source", "offset_4"), plan.signal.tributary_offsets[3]) in plan.settings


def test_safe_steps_begin_with_attenuator(plan_of: PlanOf) -> None:
    steps = plan_of("qpsk_sensitivity").safe_state
    assert [step.role for step in steps] == ["attenuator", "signal_laser", "local_oscillator"]
    assert all(step.command and step.query.endswith("?") and step.serial_number for step in steps)
    assert steps[0].words == "attenuator.attenuation to 60 dB" and steps[1].words == "signal_laser.output off"


def test_guard_is_told_the_answer_as_spoken(drivers: dict[str, Driver]) -> None:
    attenuation, output = Term("attenuator", "attenuation"), Term("signal_laser", "output")
    dialect = replace(drivers["attenuator"].setting["attenuation"], factor=-1.0, suffix=" DB")
    negative = replace(drivers["attenuator"], setting={"attenuation": dialect})
    assert spoken_setting(negative, Setting(attenuation, 60.0)) == -60.0
    assert spoken_setting(drivers["signal_laser"], Setting(output, False)) is False
    worded = replace(drivers["signal_laser"].setting["output"], words={"true": "ENABle", "false": "DISable"})
    assert spoken_setting(replace(drivers["signal_laser"], setting={"output": worded}), Setting(output, False)) == "DIS"


def test_forecast_lists_every_stay_in_order(plan_of: PlanOf) -> None:
    plan = plan_of("lo_power_map")
    told = forecast(plan)
    assert [stay.point for stay in told.stays] == [index for indices in plan.order for index in indices]
    assert told.stays[0].settings[0] == ("lo_power", "6 dBm")
    assert len(told.stays) == 2 * 3 * 5 and told.seconds == plan.forecast_s > 30 * plan.stay_s


def test_disk_follows_what_is_kept(plan_of: PlanOf) -> None:
    def filled(keep: str) -> int:
        return plan_of("qpsk_sensitivity", {'keep = "all"': f'keep = "{keep}"'}).forecast_bytes

    plan = plan_of("qpsk_sensitivity")
    assert plan.capture is not None
    one = 4 * plan.capture.record_length
    # 27 stays and 4 visits of the reference; 9 points and the reference
    assert filled("all") - filled("none") == 31 * one == filled("doubtful") - filled("none")
    assert filled("one per point") - filled("none") == 10 * one


def test_zero_dbm_is_a_power(plan_of: PlanOf) -> None:
    """The laser at exactly 0 dBm, swept: its reach is judged with it and not with some other power, or with none."""
    swept = {
        '"signal_laser.power" = "10 dBm"\n': "",
        'setting = "lo_power"\nvalues = ["6 dBm", "9 dBm", "12 dBm"]': 'setting = "signal_laser.power"\n'
        'values = ["0 dBm", "10 dBm"]',
        '"local_oscillator.wavelength" = "1550.12 nm"': 'lo_power = "9 dBm"',
        'to = "-36 dBm"': 'to = "-22 dBm"',
    }
    # 0 dBm less 12, 1.5 and 10.1 dB is -23.6 dBm, so -23 and -22 dBm are out of reach for it
    with pytest.raises(
        InputError, match=r"points 17 to 18 ask for -23 dBm to -22 dBm; the attenuator reaches .* to -23\.60 dBm"
    ):
        plan_of("lo_power_map", swept)


def test_reach_of_a_fixed_received_power(plan_of: PlanOf) -> None:
    swept = {'"signal_laser.output" = true ': 'received_power = "-13 dBm" ',
             'setting = "attenuator.attenuation"': 'setting = "receiver.gain"',
             '"15 dB"': '"0 dB"', '"30 dB"': '"3 dB"'}  # fmt: skip
    with pytest.raises(InputError, match=r"ask for -13 dBm.*the attenuator reaches -73\.60 to -13\.60 dBm"):
        plan_of("power_log", swept)


@pytest.mark.parametrize("role", ["power_meter", "attenuator"])
def test_wavelength_beside_the_signal_is_refused(plan_of: PlanOf, role: str) -> None:
    own = f'"{role}.wavelength" = '
    beside = '"signal_laser.power" = "10 dBm"'
    with pytest.raises(InputError, match=rf"{role}\.wavelength: 1551 nm contradicts signal_laser\.wavelength"):
        plan_of("power_log", {beside: f'{beside}\n{own}"1551 nm"'})
    assert plan_of("power_log", {beside: f'{beside}\n{own}"1550.12 nm"'}).points


def test_received_power_of_a_dark_laser_is_refused(plan_of: PlanOf) -> None:
    beside = 'lo_power = "12 dBm"'
    with pytest.raises(InputError, match=r"signal_laser\.output: is off where received_power is asked for"):
        plan_of("qpsk_sensitivity", {beside: f'{beside}\n"signal_laser.output" = false'})


def test_condition_sets_nothing_that_stays(plan_of: PlanOf) -> None:
    with pytest.raises(InputError, match=r"receiver\.gain: is set for a condition but neither"):
        at = 'at = { received_power = "-36 dBm"'
        plan_of("qpsk_sensitivity", {at: f'{at}, "receiver.gain" = "3 dB"'})


def test_later_condition_is_judged_with_what_stands(plan_of: PlanOf) -> None:
    """The power that the first condition set still stands in the second."""
    beside = '"signal_laser.output" = true '
    before = """[[before]]
wait_until = { reading = "power_meter.power", at = { "signal_laser.power" = "13 dBm" }, drifts_less_than = "1 dB", \
over = "1 min", at_most = "2 min" }
[[before]]
wait_until = { reading = "power_meter.power", at = { "attenuator.attenuation" = "10 dB" }, drifts_less_than = "1 dB", \
over = "1 min", at_most = "2 min" }
[[sweep]]"""
    powers = plan_of("power_log", {"[[sweep]]": before, beside: beside}).highest_power
    found = {power.plane: power.power_dbm for power in powers[:3]}
    # 13 + 0.5 - 10 - 1 - (10 - 0.3) - 9.6
    assert found[SIGNAL_INPUT] == pytest.approx(-16.8)
