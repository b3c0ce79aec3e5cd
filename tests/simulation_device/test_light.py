"""The shared light: what a power meter makes of the past, damage that stays, noise by key."""

import pytest

DARK_DB = 60.0


def _lit(bench, attenuation_db=20.0):
    bench.ask("attenuator", f"INP:ATT {attenuation_db};*OPC?")
    bench.ask("signal_laser", "POW 10;OUTP ON")
    bench.time.advance(2.0)
    return bench


def test_new_window_holds_only_new_light(bench):
    _lit(bench)
    bench.ask("attenuator", "INP:ATT 30;*OPC?")
    assert float(bench.ask("power_meter", "READ?")) == pytest.approx(1e-6, rel=1e-9)


def test_window_after_a_change_mixes_old_light(bench):
    _lit(bench)
    bench.ask("power_meter", "SENS:AVER:TIME 1")
    bench.ask("signal_laser", "OUTP OFF")
    bench.time.advance(0.25)
    # a quarter of the window is dark, less the 0.2 ms that a message takes
    assert float(bench.ask("power_meter", "MEAS:AVER?")) == pytest.approx(0.75e-5, rel=2e-3)
    bench.time.advance(0.75)
    assert float(bench.ask("power_meter", "MEAS:AVER?")) == 0.0  # exactly: nothing lingers


def test_fetch_repeats_old_result(bench):
    _lit(bench)
    bright = bench.ask("power_meter", "READ?")
    bench.ask("signal_laser", "OUTP OFF")
    bench.time.advance(1.0)
    assert bench.ask("power_meter", "FETC?") == bright
    assert float(bench.ask("power_meter", "INIT;:FETC?")) == 0.0


def test_fetch_without_any_result_is_stale(bench):
    assert bench.ask("power_meter", "FETC?") == ""
    assert bench.error("power_meter") == -230


def test_second_start_is_ignored(bench):
    bench.ask("power_meter", "INIT;INIT")
    assert bench.error("power_meter") == -213


def test_zero_in_light_is_wrong(bench):
    _lit(bench)
    bench.ask("power_meter", "CAL:ZERO:AUTO ONCE;*OPC?")
    bench.ask("signal_laser", "OUTP OFF")
    bench.time.advance(1.0)
    assert float(bench.ask("power_meter", "READ?")) == pytest.approx(-1e-5, rel=1e-9)


def test_wrong_wavelength_reads_too_little(bench):
    _lit(bench)
    right = float(bench.ask("power_meter", "READ?"))
    wrong = float(bench.ask("power_meter", "SENS:POW:WAV 1570 NM;:READ?"))
    # 20 nm off at 0.004 dB a nm
    assert wrong == pytest.approx(right * 10 ** (-0.008), rel=1e-9)


def test_overdriven_photodiode_stays_damaged(bench):
    bench.ask("local_oscillator", "POW 10;OUTP ON")
    _lit(bench, attenuation_db=30.0)
    assert bench.ask("receiver", "SENS:DAM:COUN?") == "0"
    bench.ask("signal_laser", "POW 16")
    bench.time.advance(1.0)
    bench.ask("attenuator", "*RST;*OPC?")
    bench.ask("attenuator", "INP:ATT 60;*OPC?")
    assert bench.ask("receiver", "SENS:DAM:COUN?;:STAT:QUES:COND?") == "1;512"
    assert bench.error("receiver") == -240
    bench.ask("receiver", "*RST;*CLS")
    assert bench.ask("receiver", "SENS:DAM:COUN?") == "1"


def test_short_crest_while_moving_damages(bench):
    """Nobody asks while the attenuator passes through 0 dB; the photodiode has seen it all the same."""
    bench.ask("local_oscillator", "POW 10;OUTP ON")
    _lit(bench, attenuation_db=30.0)
    bench.ask("signal_laser", "POW 16")
    bench.time.advance(1.0)
    bench.ask("attenuator", "INP:ATT 0")
    bench.time.advance(5.0)
    bench.ask("attenuator", "INP:ATT 60;*OPC?")
    assert bench.light.damaged == {"XI"}


def test_record_repeats_until_armed_again(bench):
    bench.ask("oscilloscope", "SENS:SWE:POIN 1000;:INIT;*OPC?")
    first = bench.ask("oscilloscope", "FETC:VOLT2?")
    assert bench.ask("oscilloscope", "FETC:VOLT2?") == first
    assert bench.ask("oscilloscope", "INIT;:FETC:VOLT2?") != first


def test_same_key_gives_same_record(bench):
    def record():
        bench.light.next_capture(7, 12.0)
        return bench.ask("oscilloscope", "SENS:SWE:POIN 1000;:INIT;:FETC:VOLT1?")

    first = record()
    bench.ask("power_meter", "READ?")  # readings in between move no noise of captures
    bench.time.advance(100.0)
    assert record() == first
    assert bench.ask("oscilloscope", "INIT;:FETC:VOLT1?") != first


def test_sixteen_bits_carry_the_same_codes(bench):
    bench.ask("oscilloscope", "SENS:SWE:POIN 1000;:INIT;*OPC?")
    narrow = bench.ask("oscilloscope", "FETC:VOLT3?").encode("latin-1")
    wide = bench.ask("oscilloscope", "FORM INT,16;:FETC:VOLT3?").encode("latin-1")
    swapped = bench.ask("oscilloscope", "FORM:BORD SWAP;:FETC:VOLT3?").encode("latin-1")
    assert wide[6:] == b"".join(bytes((code, 0)) for code in narrow[6:])
    assert swapped[6:] == b"".join(bytes((0, code)) for code in narrow[6:])


def test_power_up_forgets_everything_but_identity(bench):
    _lit(bench)
    bench.ask("power_meter", "CAL:ZERO:AUTO ONCE;*OPC?")
    for instrument in bench.instruments.values():
        instrument.power_up()
    bench.light.start_again()
    assert float(bench.ask("power_meter", "READ?")) == 0.0
    assert float(bench.ask("attenuator", "INP:ATT?")) == 0.0
