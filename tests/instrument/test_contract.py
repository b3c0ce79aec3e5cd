"""Every shipped driver against the simulated instrument that speaks it: every term set, read back, refused."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import pytest

from owlight import shipped
from owlight.driver import read_driver
from owlight.errors import InstrumentError
from owlight.vocabulary.terms import TERMS
from owlight.vocabulary.values import Applied, Reading, Term, Value

NAMES = shipped.names("drivers")
VALUES: dict[str, tuple[Value, ...]] = (
    {
        "output": (True, False),
        "bias": (True, False),
        "power": (10.0, 6.0),
        "attenuation": (60.0, 23.4, 30.0),
        "wavelength": (1550.12, 1552.5),
        "averaging_time": (0.2, 0.05),
        "modulation": ("16QAM", "QPSK"),
        "symbol_rate": (28e9, 32e9),
        "polarisations": (1, 2),
        "rolloff": (0.2, 0.1),
        "pattern_order": (11, 15),
        "sample_rate": (40e9, 80e9),
        "record_length": (20_000, 50_000),
        "coupling": ("DC", "AC"),
        "gain": (-1.5, 0.0),
        "gain_control": ("automatic", "manual"),
    }
    | {f"offset_{n}": (1000 * n, 0) for n in range(1, 5)}
    | {f"range_{n}": (0.4, 0.8) for n in range(1, 5)}
)


def role_of(name: str) -> str:
    driver = read_driver(shipped.find("drivers", name).read_text("utf-8"), name).value
    assert driver is not None
    return {"laser": "signal_laser"}.get(driver.role, driver.role)


@pytest.mark.parametrize("name", NAMES)
def test_every_setting_is_set_and_read_back(name: str, join_with: Callable[..., object]) -> None:
    role = role_of(name)
    joined = join_with(**{role: name})
    instrument = joined.instrument(role)
    for term_name in instrument.driver.setting:
        term = Term(role, term_name)
        for value in VALUES[term_name]:
            applied = instrument.set(term, value)
            assert applied.within and applied in joined.events
            assert applied.read_back == pytest.approx(value, abs=instrument.driver.tolerance_of(term) or 0)
            assert type(applied.read_back) is TERMS[term].type
            # the instrument itself, asked without any of our code, holds it too
            place = term_name.rsplit("_", 1) if term_name[-1].isdigit() else (term_name, 1)
            held = joined.simulated[role].value(place[0], int(place[1]))
            assert held == pytest.approx(value, rel=1e-4) if isinstance(value, float) else held == value


@pytest.mark.parametrize("name", NAMES)
def test_every_reading_is_fresh_and_counted(name: str, join_with: Callable[..., object]) -> None:
    role = role_of(name)
    joined = join_with(**{role: name})
    instrument = joined.instrument(role)
    for term_name in instrument.driver.reading:
        reading = instrument.read(Term(role, term_name), count=4, phase="before")
        assert reading.count == 4 and reading.phase == "before" and reading in joined.events
        assert reading.value is not None and math.isfinite(reading.value)
    # a setting may be logged as a reading
    first = next(iter(instrument.driver.setting))
    assert isinstance(instrument.read(Term(role, first)), Reading)


BEYOND: dict[str, tuple[str, Value]] = {
    "signal_laser": ("power", 40.0),
    "attenuator": ("attenuation", 99.0),
    "power_meter": ("averaging_time", 500.0),
    "pattern_source": ("pattern_order", 14),
    "oscilloscope": ("range_2", 500.0),
    "receiver": ("gain", 50.0),
}


@pytest.mark.parametrize("name", NAMES)
def test_what_cannot_be_set_is_never_believed(name: str, join_with: Callable[..., object]) -> None:
    """Refused with an error, clipped with a warning bit or clipped in silence: each ends in the same refusal."""
    role = role_of(name)
    joined = join_with(**{role: name})
    instrument = joined.instrument(role)
    term_name, value = BEYOND[role]
    with pytest.raises(InstrumentError) as refusal:
        instrument.set(Term(role, term_name), value)
    assert refusal.value.role == role
    assert str(refusal.value).count(".") >= 2  # what happened, and what to do
    assert not any(isinstance(event, Applied) and event.within for event in joined.events)


@pytest.mark.parametrize("name", [n for n in NAMES if "oscilloscope" in n])
def test_record_is_in_volts_whatever_the_dialect(name: str, join_with: Callable[..., object]) -> None:
    joined = join_with(oscilloscope=name)
    instrument = joined.instrument("oscilloscope")
    for term_name, value in {"sample_rate": 80e9, "record_length": 20_000}.items():
        instrument.set(Term("oscilloscope", term_name), value)
    ranges_v = {1: 0.2, 2: 0.2, 3: 0.4, 4: 0.4}
    for channel, range_v in ranges_v.items():
        instrument.set(Term("oscilloscope", f"range_{channel}"), range_v)
    lanes = instrument.record((1, 2, 3, 4), 20_000, ranges_v)
    again = instrument.record((4, 1), 20_000, ranges_v)
    for lane in lanes:
        assert lane.codes.size == 20_000
        # the optics of these tests give 20 mV rms whatever the range; 20,000 samples know it to 0.5 % (k = 1)
        assert np.std(lane.codes * lane.volts_per_code) == pytest.approx(0.02, rel=0.03)
    assert len(again) == 2 and not np.array_equal(again[1].codes, lanes[0].codes)


def test_wrong_byte_order_would_be_seen(join_with: Callable[..., object]) -> None:
    """Sixteen bits with eight in the upper byte: read the other way round, every code is below 256."""
    joined = join_with(oscilloscope="oscilloscope_by_division")
    instrument = joined.instrument("oscilloscope")
    instrument.set(Term("oscilloscope", "record_length"), 20_000)
    lane = instrument.record((1,), 20_000, {1: 0.8})[0]
    assert lane.codes.dtype == np.int16 and np.all(lane.codes % 256 == 0)


def test_asked_range_stands_in_the_refusal(joined: object) -> None:
    with pytest.raises(InstrumentError, match=r"-222.*Allowed: 0 dBm to 16 dBm"):
        joined.instrument("signal_laser").set(Term("signal_laser", "power"), 20.0)


def test_silent_clipping_is_an_error_with_both_values(joined: object) -> None:
    with pytest.raises(InstrumentError, match=r"no error, but it reads back 60 dB.*Allowed: 0 dB to 60 dB"):
        joined.instrument("attenuator").set(Term("attenuator", "attenuation"), 70.0)


def test_rounding_within_tolerance_is_kept(joined: object) -> None:
    applied = joined.instrument("signal_laser").set(Term("signal_laser", "power"), 7.123)
    assert applied.within and applied.setting.value == 7.123
    assert applied.read_back == pytest.approx(7.12)  # its grid is 0.01 dB


def test_light_has_settled_when_set_returns(joined: object) -> None:
    """*OPC? of this laser answers before the light does: only the SETTling bit tells."""
    instrument = joined.instrument("signal_laser")
    applied = instrument.set(Term("signal_laser", "output"), True)
    assert applied.settled_s >= 0.3
    assert joined.simulated["signal_laser"].value_at("output", joined.time.now_s()) is True


def test_entries_of_before_are_not_ours(joined: object) -> None:
    joined.simulated["signal_laser"].status.queue.push(-310, "from yesterday")
    instrument = joined.instrument("signal_laser")
    instrument.take_over()
    assert instrument.set(Term("signal_laser", "power"), 5.0).within
    assert any("from yesterday" in getattr(event, "received", "") for event in joined.events)


def test_nothing_is_ever_reset_or_cleared(joined: object) -> None:
    for role in joined.drivers:
        instrument = joined.instrument(role)
        instrument.take_over()
        for name in instrument.driver.setting:
            instrument.set(Term(role, name), VALUES[name][0])
    sent = " ".join(message for _, message in joined.heard)
    assert "*RST" not in sent and "*CLS" not in sent and "*SRE" not in sent


def test_endless_error_queue_is_an_error(joined: object) -> None:
    joined.spoil["signal_laser"] = lambda message: b'-100,"again"\n' if message == b"SYST:ERR?" else None
    with pytest.raises(InstrumentError, match="no end"):
        joined.instrument("signal_laser").set(Term("signal_laser", "power"), 5.0)


def test_what_never_settles_is_bounded(joined: object) -> None:
    joined.spoil["signal_laser"] = lambda message: b"2\n" if message == b"STAT:OPER:COND?" else None
    with pytest.raises(InstrumentError, match="did not settle within 10 s"):
        joined.instrument("signal_laser").set(Term("signal_laser", "power"), 5.0)


def test_not_a_number_spoils_the_mean(joined: object) -> None:
    joined.spoil["power_meter"] = lambda message: b"9.91E37\n" if message.startswith(b"READ") else None
    reading = joined.instrument("power_meter").read(Term("power_meter", "power"), count=3)
    assert reading.value is None and reading.standard_deviation is None


def test_mean_and_scatter_are_those_of_the_readings(joined: object) -> None:
    answers = iter([b"1E-6\n", b"2E-6\n", b"4E-6\n"])
    joined.spoil["power_meter"] = lambda message: next(answers) if message.startswith(b"READ") else None
    reading = joined.instrument("power_meter").read(Term("power_meter", "power"), count=3)
    assert reading.value == pytest.approx(7e-6 / 3)
    assert reading.standard_deviation == pytest.approx(np.std([1e-6, 2e-6, 4e-6], ddof=1))


def test_nonsense_answer_is_no_value(joined: object) -> None:
    joined.spoil["attenuator"] = lambda message: b"ready\n" if message == b"INP:ATT?" else None
    with pytest.raises(InstrumentError, match="'ready' is not a number"):
        joined.instrument("attenuator").set(Term("attenuator", "attenuation"), 5.0)
