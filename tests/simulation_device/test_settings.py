"""Settings and the habits that bite: clipping, rounding, early *OPC?, reset to full light."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from owlight.simulation.device.message import Parameter
from owlight.simulation.device.model import SettingFile, read_instrument
from owlight.simulation.device.setting import Setting, canonical, spoken
from owlight.simulation.instruments.receiver import Receiver


def test_limits_are_asked_and_set_by_name(bench):
    assert bench.ask("signal_laser", "POW? MIN;:POW? MAX;:POW? DEF").split(";") == [
        "0.00000000000E+00",
        "1.60000000000E+01",
        "6.00000000000E+00",
    ]
    assert float(bench.ask("signal_laser", "POW MAX;POW?")) == 16.0


def test_laser_refuses_what_it_cannot(bench):
    assert float(bench.ask("signal_laser", "POW 3;POW 99;POW?")) == 3.0
    assert bench.error("signal_laser") == -222


def test_attenuator_clips_and_warns(bench):
    assert float(bench.ask("attenuator", "INP:ATT 99;ATT?")) == 60.0
    assert bench.error("attenuator") == 0
    assert bench.ask("attenuator", "STAT:QUES?") == "16384"  # bit 14, command warning


def test_meter_clips_without_a_word(bench):
    assert float(bench.ask("power_meter", "SENS:AVER:TIME 100;TIME?")) == 10.0
    assert bench.ask("power_meter", "STAT:QUES?;:SYST:ERR:COUN?") == "0;0"


def test_value_is_rounded_to_grid(bench):
    assert float(bench.ask("signal_laser", "POW 3.456;POW?")) == 3.46


def test_laser_says_done_before_light_settles(bench):
    assert bench.ask("signal_laser", "OUTP ON;*OPC?;:STAT:OPER:COND?") == "1;2"
    assert not bench.light.now().signal_on
    bench.time.advance(0.3)
    assert bench.ask("signal_laser", "STAT:OPER:COND?") == "0"
    assert bench.light.now().signal_on


def test_attenuator_says_done_when_there(bench):
    assert bench.ask("attenuator", "INP:ATT 20;*OPC?;:STAT:OPER:COND?") == "1;0"
    assert bench.light.now().attenuation_db == 20.0


def test_light_passes_every_attenuation_between(bench):
    bench.ask("attenuator", "INP:ATT 20;*OPC?", "INP:ATT 40")
    bench.time.advance(0.2)
    # half of the 400 ms it takes, less the 0.2 ms of the message
    assert bench.light.now().attenuation_db == pytest.approx(30.0, abs=0.05)


def test_reset_opens_attenuator(bench):
    bench.ask("attenuator", "INP:ATT 50;*OPC?", "*RST;*OPC?")
    assert bench.light.now().attenuation_db == 0.0


def test_light_goes_off_at_once(bench):
    bench.ask("signal_laser", "OUTP ON")
    bench.time.advance(1.0)
    bench.ask("signal_laser", "OUTP OFF")
    assert not bench.light.now().signal_on


@pytest.mark.parametrize(
    ("name", "unit", "low", "high"),
    [
        ("power", "W", -60, 20),
        ("wavelength", "THZ", 1260, 1650),
        ("wavelength", "M", 1260, 1650),
        ("sample_rate", "S", 1e9, 2e11),
    ],
)
def test_spoken_unit_is_inverted(name, unit, low, high):
    @settings(max_examples=50)
    @given(st.floats(low, high))
    def check(value):
        assert canonical(name, spoken(name, value, unit), unit) == pytest.approx(value, rel=1e-10, abs=1e-9)

    check()


@settings(max_examples=100)
@given(st.floats(-1e6, 1e6), st.sampled_from([None, 0.01, 0.5]))
def test_clipped_value_stays_within(value, grid):
    setting = Setting("gain", SettingFile("A", unit="DB", lowest=-10.0, highest=10.0, grid=grid, beyond="clip"))
    result, clipped = setting.within(setting.parse(Parameter("number", repr(value)), True))
    assert -10.0 <= result <= 10.0
    assert clipped or abs(result - value) <= (grid or 0.0)


def test_file_with_mistakes_lists_them_all():
    text = """
instrument = "x"
format_version = 1
kind = "laser"
[identity]
maker = "m"
model = "m"
firmware = "1"
[setting.power]
command = "power!"
unit = "FURLONG"
[setting.mode]
command = "MODE"
type = "choice"
"""
    words = [str(problem) for problem in read_instrument(text, "x.toml").problems]
    assert len(words) == 3
    assert any("header pattern" in line for line in words)
    assert any("FURLONG" in line and "DBM" in line for line in words)


def test_unknown_reading_of_a_kind_is_refused(bench):
    with pytest.raises(ValueError, match="photocurrent"):
        bench.instruments["power_meter"].behave(Receiver(bench.light))
