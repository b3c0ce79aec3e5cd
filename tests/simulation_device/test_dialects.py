"""Every shipped dialect takes its own words, and its habits are what its file says."""

import pytest

ROLE = {"laser": "signal_laser", "attenuator": "attenuator", "oscilloscope": "oscilloscope"}
SPOKEN = [
    ("laser", "OUTP ON;OUTP?", "1"),
    ("laser", "SOUR:WAV 1550.12 NM;WAV?", "1.55012000000E-06"),
    ("laser_in_watts", "OUTP ON;OUTP?", "ON"),
    ("laser_in_watts", "SOUR:POW 2 MW;POW?", "2.00000000000E-03"),
    ("laser_in_watts", "SOUR:WAV:CW 1550.12NM;CW?", "1.55012000000E+03"),
    ("laser_in_frequency", "LEV 99;*WAI;LEV?", "16.000000"),
    ("laser_in_frequency", "FREQ 193.5;*WAI;FREQ?", "193.500000"),
    ("laser_in_frequency", "SHUT OPEN;*WAI;SHUT?", "OPEN"),
    ("attenuator_actual", "OUTP:ATT 30;*WAI;ATT?", "3.00000000000E+01"),
    ("attenuator_actual", "OUTP:ATT 30;ATT?", "0.00000000000E+00"),
    ("attenuator_negative", "INP:GAIN -30 DB;GAIN?", "-3.00000000000E+01"),
    ("attenuator_negative", "INP:GAIN -99;GAIN?", "-6.00000000000E+01"),
    ("oscilloscope_by_division", "CHAN2:SCAL 0.05;SCAL?", "5.00000000000E-02"),
    ("oscilloscope_by_division", "CHAN:COUP DCL;COUP?", "DCL"),
    ("oscilloscope_by_division", "SING;:ACQ:BUSY?;*OPC?;:ACQ:BUSY?", "1;1;0"),
    ("oscilloscope_by_division", "CHAN2:SCAL 0.05;:WAV:FORM WORD;:WAV2:INCR?", "6.10351562500E-06"),
    ("oscilloscope_by_trace", "SWE:RATE 160;RATE?", "1.60000000000E+02"),
    ("oscilloscope_by_trace", "TRAC:NEXT;:STAT:OPER:COND?", "16"),
]
LACKING = [
    ("laser_in_watts", "STAT:OPER:COND?"),
    ("laser_in_frequency", "*OPC?"),
    ("laser_in_frequency", "SYST:ERR?"),
    ("laser_in_frequency", "LEV 3 DBM"),
    ("attenuator_actual", "*OPC?"),
    ("attenuator_actual", "OUTP:ATT 3 DB"),
    ("attenuator_negative", "INP:WAV 1.55E-6"),
    ("oscilloscope_by_division", "STAT:OPER:COND?"),
    ("oscilloscope_by_trace", "*OPC?"),
    ("oscilloscope_by_trace", "SYST:ERR?"),
]


def _speaking(make_bench, dialect):
    role = ROLE[dialect.split("_")[0]]
    return make_bench(**{role: dialect}), role


@pytest.mark.parametrize(("dialect", "message", "answer"), SPOKEN)
def test_dialect_answers_in_its_own_way(make_bench, dialect, message, answer):
    bench, role = _speaking(make_bench, dialect)
    assert bench.ask(role, message) == answer


@pytest.mark.parametrize(("dialect", "message"), LACKING)
def test_dialect_lacks_what_its_file_says(make_bench, dialect, message):
    bench, role = _speaking(make_bench, dialect)
    bench.ask(role, "*CLS")
    assert bench.ask(role, message) == ""
    assert bench.ask(role, "*ESR?") == "32"  # a command error, whether or not there is a queue to say so


def test_attenuator_meanings_agree_on_the_light(make_bench):
    for dialect, message in (
        ("attenuator", "INP:ATT 12.5"),
        ("attenuator_actual", "OUTP:ATT 12.5"),
        ("attenuator_negative", "INP:GAIN -12.5"),
    ):
        bench, role = _speaking(make_bench, dialect)
        bench.ask(role, message)
        bench.time.advance(2.0)
        assert bench.light.now().attenuation_db == 12.5, dialect


def test_trace_is_new_only_once(make_bench):
    bench, role = _speaking(make_bench, "oscilloscope_by_trace")
    assert bench.ask(role, "SWE:SIZE 1000;:TRAC:NEXT;*WAI;:TRAC1:DATA?").startswith("#41000")
    bench.ask(role, "*CLS")
    assert bench.ask(role, "TRAC1:DATA?") == ""
    assert bench.ask(role, "*ESR?") == "16"
    assert bench.ask(role, "TRAC2:DATA?").startswith("#41000")
