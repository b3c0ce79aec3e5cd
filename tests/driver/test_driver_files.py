"""Driver files: shipped ones are whole, broken ones name every mistake, values survive the way there and back."""

import math
import tomllib
from pathlib import Path

import pytest

from owlight import shipped
from owlight.driver import Driver, program_message, query, read_driver, value_of
from owlight.vocabulary.terms import TERMS
from owlight.vocabulary.values import Term, Value

NAMES = shipped.names("drivers")


def shipped_driver(name: str) -> Driver:
    path = shipped.find("drivers", name)
    document = read_driver(path.read_text("utf-8"), str(path))
    assert document.problems == ()
    assert document.value is not None
    return document.value


def problems(text: str) -> list[str]:
    return [str(problem) for problem in read_driver(text, "x.toml").problems]


@pytest.mark.parametrize("name", NAMES)
def test_shipped_driver_is_whole(name: str) -> None:
    driver = shipped_driver(name)
    assert driver.driver == name == Path(shipped.find("drivers", name)).stem
    assert all(driver.knows(term) or term.name in driver.absent for term in driver.terms.values())


def test_every_role_has_a_generic_driver() -> None:
    generic = {shipped_driver(name).role for name in NAMES if name.startswith("generic_")}
    assert generic == {"laser", "attenuator", "power_meter", "pattern_source", "oscilloscope", "receiver"}


@pytest.mark.parametrize("role", ["laser", "attenuator", "oscilloscope"])
def test_roles_have_two_dialects(role: str) -> None:
    dialects = [name for name in NAMES if shipped_driver(name).role == role and not name.startswith("generic_")]
    assert len(dialects) >= 2


EXAMPLES: dict[str, Value] = (
    {
        "output": True,
        "bias": False,
        "power": -3.21,
        "attenuation": 23.456,
        "wavelength": 1550.116,
        "averaging_time": 0.125,
        "modulation": "16QAM",
        "symbol_rate": 32e9,
        "polarisations": 2,
        "rolloff": 0.1,
        "pattern_order": 15,
        "sample_rate": 80e9,
        "record_length": 250_000,
        "coupling": "DC",
        "gain": -1.5,
        "gain_control": "automatic",
    }
    | {f"offset_{n}": 1000 * n for n in range(1, 5)}
    | {f"range_{n}": 0.4 * n for n in range(1, 5)}
)


@pytest.mark.parametrize("name", NAMES)
def test_values_survive_both_ways(name: str) -> None:
    driver = shipped_driver(name)
    for term_name, setting in driver.setting.items():
        term, value = driver.terms[term_name], EXAMPLES[term_name]
        header, _, words = program_message(driver, term, value).partition(" ")
        assert header == setting.command.split()[0]
        answer = words.removesuffix(setting.suffix) if setting.suffix else words  # answers carry no units
        back = value_of(driver, term, answer)
        if isinstance(value, float):
            assert isinstance(back, float)
            assert math.isclose(back, value, rel_tol=1e-12)  # two conversions of doubles, each good to 1e-15 or so
        else:
            assert back == value and type(back) is type(value)
        assert query(driver, term).endswith("?")


def test_units_are_turned_as_physics_has_it() -> None:
    power, wavelength = Term("signal_laser", "power"), Term("signal_laser", "wavelength")
    watts = shipped_driver("laser_in_watts")
    assert program_message(watts, power, 0.0) == "SOUR:POW:LEV 0.001W"
    assert program_message(watts, wavelength, 1550.12) == "SOUR:WAV:CW 1550.12NM"
    # 193.1 THz is the anchor of the grid of ITU-T G.694.1; its vacuum wavelength is 1552.5244 nm (c exact in SI)
    hertz = shipped_driver("laser_in_frequency")
    assert float(program_message(hertz, wavelength, 1552.5244).split()[1]) == pytest.approx(193.1, abs=1e-5)
    assert value_of(hertz, wavelength, "193.1") == pytest.approx(1552.5244, abs=1e-4)


def test_sample_rate_is_spoken_as_interval() -> None:
    driver = shipped_driver("generic_oscilloscope")
    term = Term("oscilloscope", "sample_rate")
    assert program_message(driver, term, 80e9) == "SENS:SWE:TINT 1.25E-11"
    assert value_of(driver, term, "1.25E-11") == pytest.approx(80e9, rel=1e-15)


def test_loss_may_be_negative_gain() -> None:
    driver = shipped_driver("attenuator_negative")
    assert program_message(driver, Term("attenuator", "attenuation"), 20.0) == "INP:GAIN -20DB"
    assert value_of(driver, Term("attenuator", "attenuation"), "-2.0E1") == 20.0


def test_range_may_be_spoken_by_division() -> None:
    driver = shipped_driver("oscilloscope_by_division")
    assert program_message(driver, Term("oscilloscope", "range_3"), 0.8) == "CHAN3:SCAL 0.1"


def test_long_and_short_words_are_understood() -> None:
    driver = shipped_driver("generic_receiver")
    term = Term("receiver", "gain_control")
    assert program_message(driver, term, "manual") == "INP:GAIN:MODE MAN"
    assert value_of(driver, term, "MANUAL") == value_of(driver, term, "man") == "manual"
    shutter = shipped_driver("laser_in_frequency")
    assert program_message(shutter, Term("local_oscillator", "output"), False) == "SHUT CLOSED"
    assert value_of(shutter, Term("local_oscillator", "output"), "OPEN") is True


def test_unknown_word_is_refused_with_list() -> None:
    with pytest.raises(ValueError, match="QPSK"):
        program_message(shipped_driver("generic_pattern_source"), Term("pattern_source", "modulation"), "OOK")


def test_not_a_number_is_no_power() -> None:
    assert value_of(shipped_driver("generic_power_meter"), Term("power_meter", "power"), "9.91E37") is None


def test_darkness_has_no_level() -> None:
    driver = shipped_driver("laser_in_watts")
    assert value_of(driver, Term("signal_laser", "power"), "0") == -math.inf


def test_ranges_and_tolerances_in_term_units() -> None:
    driver = shipped_driver("laser_in_frequency")
    assert driver.range_of(Term("signal_laser", "wavelength")) == pytest.approx((1527.0, 1567.0))
    assert driver.tolerance_of(Term("signal_laser", "wavelength")) == pytest.approx(2e-3)
    assert driver.tolerance_of(Term("signal_laser", "power")) == 0.02
    assert driver.tolerance_of(Term("signal_laser", "output")) is None
    assert shipped_driver("generic_laser").range_of(Term("signal_laser", "power")) is None


def test_laser_fits_both_laser_roles() -> None:
    driver = shipped_driver("generic_laser")
    assert [role for role in ("signal_laser", "local_oscillator", "attenuator") if driver.fits(role)] == [
        "signal_laser",
        "local_oscillator",
    ]
    assert not driver.knows(Term("attenuator", "wavelength"))


def test_missing_term_is_named() -> None:
    text = shipped.find("drivers", "generic_attenuator").read_text("utf-8")
    cut = text[: text.index("[setting.wavelength]")]
    assert any('setting.wavelength: is missing; give it, or name it in "absent"' in line for line in problems(cut))
    assert problems(cut.replace('role = "attenuator"', 'role = "attenuator"\nabsent = ["wavelength"]')) == []


BROKEN = """
driver = "broken"
format_version = 1
role = "laser"
lacks = ["*OPC?"]
absent = ["power"]

[setting.output]
command = "OUTP"
query = "OUTP?"

[setting.power]
command = "POW {value}"
query = "POW?"
speaks = "nm"
range = { low = "0 dB", high = "10 dBm" }
settled = { by = "wait", wait = "1 s" }

[setting.wavelenght]
command = "WAV {value}"
query = "WAV?"
"""


def test_every_mistake_is_named_at_once() -> None:
    found = "\n".join(problems(BROKEN))
    for words in (
        "needs {value} once",
        "cannot rest on *OPC?",
        "'nm' cannot be turned into dBm",
        "'0 dB' is a ratio (dB)",
        "setting.power.tolerance: is missing",
        'no such term; did you mean "wavelength"?',
        "setting.wavelength: is missing",
        "power is said to be absent, but the file has it",
    ):
        assert words in found
    assert "x.toml:9:" in found  # the line of the command without {value}


def test_frequency_difference_is_no_wavelength_tolerance() -> None:
    text = shipped.find("drivers", "generic_laser").read_text("utf-8").replace('"2 pm"', '"1 GHz"')
    assert any("a length" in line for line in problems(text))


def test_shipped_files_are_plain_toml() -> None:
    for name in NAMES:
        assert tomllib.loads(shipped.find("drivers", name).read_text("utf-8"))["format_version"] == 1


def test_examples_cover_all_settings() -> None:
    settings = {term.name for term, info in TERMS.items() if info.kind == "setting"}
    assert settings == set(EXAMPLES)
