"""What [settings] says is what stands when the first stay begins, and no source is lit that nothing asks for."""

from __future__ import annotations

from itertools import pairwise
from pathlib import Path

import pytest

from owlight import shipped
from owlight.bench import LightState
from owlight.errors import InstrumentError
from owlight.instrument.open_bench import OpenBench
from owlight.plan import PlanRequest, light_at_start, make_plan
from owlight.quantity import dbm
from owlight.run.apply import apply_settings, of_attenuator
from owlight.run.attended import AttendedClock, StopRequests
from owlight.run.night import Night
from owlight.run.prepare import prepare
from owlight.sequence import read_sequence
from owlight.vocabulary.plan import Plan
from owlight.vocabulary.values import Term

SETTINGS = """
sequence = "s"
format_version = 1
[settings]
{settings}
{before}
[[sweep]]
{sweep}
[record]
readings = ["power_meter.power"]
[stop]
passes = 1
"""
GAIN = 'setting = "receiver.gain"\nvalues = ["0 dB", "1 dB"]'


def plan_for(joined, text: str) -> Plan:
    document = read_sequence(text, "s.toml")
    assert document.problems == ()
    return make_plan(PlanRequest(document.value, joined.paper, joined.drivers, (), None, 1, True, joined.resources))


def plan_with(joined, settings: str, sweep: str = GAIN, before: str = "") -> Plan:
    return plan_for(joined, SETTINGS.format(settings=settings, sweep=sweep, before=before))


def night_on(joined, bench: OpenBench, plan: Plan) -> Night:
    stop = StopRequests()
    clock = AttendedClock(joined.clock, stop, lambda: None, real_time=False)
    return Night(plan, bench, joined.events.append, clock, bench.stamper, stop)


def sent(joined) -> list[tuple[str, str]]:
    return [(role, m.removesuffix(";*OPC?")) for role, m in joined.heard if "?" not in m.removesuffix(";*OPC?")]


def test_switched_off_source_stays_off(joined, tmp_path: Path) -> None:
    """Neither the order of lighting nor a standing value may override what the sequence says."""
    plan = plan_with(
        joined,
        '"signal_laser.power" = "10 dBm"\n"attenuator.attenuation" = "20 dB"\n'
        'lo_power = "10 dBm"\n"local_oscillator.output" = false',
    )
    with joined.open(tmp_path) as bench:
        prepare(night_on(joined, bench, plan))
        assert bench.light == LightState(True, 10.0, False, 11.0, 20.0)
        assert ("local_oscillator", "OUTP:STAT 1") not in sent(joined)
        assert {power.plane for power in plan.highest_power} == {"receiver signal input", "power meter", "photodiode"}
    way_db = [float(m.split()[1]) for role, m in sent(joined) if m.startswith("INP:ATT")]
    lit = sent(joined).index(("signal_laser", "OUTP:STAT 1"))
    assert ("attenuator", "INP:ATT 60") in sent(joined)[:lit]
    assert min(after - before for before, after in pairwise(way_db)) >= -3.0 - 1e-9


def test_shipped_power_log_lights_the_signal_alone(joined, tmp_path: Path) -> None:
    plan = plan_for(joined, shipped.find("sequences", "power_log").read_text("utf-8"))
    with joined.open(tmp_path) as bench:
        prepare(night_on(joined, bench, plan))
        assert bench.light.signal_on is True and bench.light.lo_on is False
    assert ("local_oscillator", "OUTP:STAT 1") not in sent(joined)


def test_source_left_on_by_somebody_is_turned_off(joined, tmp_path: Path) -> None:
    with joined.open(tmp_path) as bench:
        bench.light_up(LightState(False, None, True, 11.0))
        bench.light_up(LightState(True, 10.0, False))
        assert (bench.light.signal_on, bench.light.lo_on) == (True, False)


def test_forecast_and_light_decide_alike(joined) -> None:
    """One function decides; here it is held against the rule in words."""
    for settings, sweep, expected in (
        ('"signal_laser.power" = "5 dBm"', GAIN, (True, False)),
        ('"signal_laser.output" = true', GAIN, (True, False)),
        ('lo_power = "5 dBm"', GAIN, (False, True)),
        ('"local_oscillator.output" = true', GAIN, (False, True)),
        ('"receiver.gain_control" = "manual"', GAIN, (False, False)),
        ('"signal_laser.power" = "5 dBm"\n"signal_laser.output" = false', GAIN, (False, False)),
        ('"receiver.gain" = "0 dB"', 'setting = "lo_power"\nvalues = ["5 dBm", "6 dBm"]', (False, True)),
    ):
        plan = plan_with(joined, settings, sweep)
        state = light_at_start(joined.paper, plan.settings, plan.points, plan.conditions)
        assert (state.signal_on, state.lo_on) == expected, settings
        assert state.attenuation_db == 60.0
        planes = {power.plane for power in plan.highest_power}
        assert ("receiver LO input" in planes, "receiver signal input" in planes) == expected[::-1], settings


def test_wavelength_of_the_meter_is_applied_alone(joined, tmp_path: Path) -> None:
    plan = plan_with(joined, '"power_meter.wavelength" = "1551 nm"')
    with joined.open(tmp_path) as bench:
        prepare(night_on(joined, bench, plan))
        assert bench.read_setting(Term("power_meter", "wavelength")) == pytest.approx(1551.0)


def test_setting_that_moved_is_named(joined, tmp_path: Path) -> None:
    """Somebody turns a knob between the setting and the first stay."""
    plan = plan_with(joined, '"receiver.gain_control" = "manual"\n"signal_laser.power" = "5 dBm"')

    def moved(message: bytes) -> bytes | None:
        lit = ("signal_laser", "OUTP:STAT 1") in sent(joined)
        return b"AUTO\n" if lit and message == b"INP:GAIN:MODE?" else None

    joined.spoil["receiver"] = moved
    said = r"receiver\.gain_control stands at automatic where manual"
    with joined.open(tmp_path) as bench, pytest.raises(InstrumentError, match=said):
        prepare(night_on(joined, bench, plan))


def test_condition_leaves_no_trace(joined, tmp_path: Path) -> None:
    """Warm-up at another power and attenuation; the stays get what [settings] says."""
    before = """[[before]]
wait_until = { reading = "power_meter.power", at = { received_power = "-30 dBm", "signal_laser.power" = "6 dBm" }, \
drifts_less_than = "1 dB", over = "8 s", at_most = "60 s" }"""
    settings = '"signal_laser.power" = "10 dBm"\n"attenuator.attenuation" = "30 dB"'
    plan = plan_with(joined, settings, before=before)
    with joined.open(tmp_path) as bench:
        bench.set(Term("pattern_source", "output"), True)
        prepare(night_on(joined, bench, plan))
        assert bench.light == LightState(True, 10.0, False, bench.light.lo_power_dbm, 30.0)


def test_fixed_attenuation_survives_a_raise(joined, tmp_path: Path) -> None:
    """More power closes the attenuator; the stay must not be measured behind it."""
    sweep = 'setting = "signal_laser.power"\nvalues = ["2 dBm", "8 dBm"]'
    plan = plan_with(joined, '"attenuator.attenuation" = "25 dB"', sweep)
    with joined.open(tmp_path) as bench:
        night = night_on(joined, bench, plan)
        prepare(night)
        for point in (*plan.points, plan.points[0]):
            apply_settings(night, (*of_attenuator(plan), *point.settings))
            assert bench.light.attenuation_db == pytest.approx(25.0)
            assert bench.light.signal_power_dbm == point.settings[0].value


def test_swept_wavelengths_change_in_one_dark_action(joined, tmp_path: Path) -> None:
    """Each laser keeps the wavelength it was given, and neither is tuned while anything is lit."""
    sweep = """setting = "local_oscillator.wavelength"
values = ["1550.12 nm", "1550.2 nm"]
[[sweep]]
setting = "signal_laser.wavelength"
values = ["1550.12 nm", "1550.3 nm"]"""
    plan = plan_with(joined, '"signal_laser.power" = "10 dBm"\nlo_power = "10 dBm"', sweep)
    laser = {role: joined.simulated[role] for role in ("signal_laser", "local_oscillator")}
    lit_while_tuned: list[str] = []

    def watch(role: str, message: bytes) -> None:
        if message.startswith(b"SOUR:WAV ") and any(each.value("output") for each in laser.values()):
            lit_while_tuned.append(role)

    for role in laser:
        joined.spoil[role] = lambda message, role=role: watch(role, message)
    with joined.open(tmp_path) as bench:
        night = night_on(joined, bench, plan)
        prepare(night)
        for point in (plan.points[3], plan.points[1], plan.points[1], plan.points[2]):
            apply_settings(night, point.settings)
            lo_nm, signal_nm = (setting.value for setting in point.settings)
            assert laser["local_oscillator"].value("wavelength") == pytest.approx(lo_nm)
            assert laser["signal_laser"].value("wavelength") == pytest.approx(signal_nm)
            assert bench.light.signal_on is True and bench.light.lo_on is True
    assert lit_while_tuned == []


def test_received_power_may_be_a_setting(joined, tmp_path: Path) -> None:
    """One power for all stays; a swept source does not move it."""
    sweep = 'setting = "lo_power"\nvalues = ["5 dBm", "9 dBm"]'
    plan = plan_with(joined, '"signal_laser.power" = "10 dBm"\nreceived_power = "-35 dBm"', sweep)
    with joined.open(tmp_path) as bench:
        bench.set(Term("pattern_source", "output"), True)
        night = night_on(joined, bench, plan)
        prepare(night)
        for point in plan.points:
            apply_settings(night, (*of_attenuator(plan), *point.settings))
            # grid of the attenuator and noise of the reading, both below 0.03 dB
            assert dbm(joined.truth.truth()["receiver_power_w"]) == pytest.approx(-35.0, abs=0.06)
