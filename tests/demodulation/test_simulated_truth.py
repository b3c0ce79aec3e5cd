"""The shipped bench, demodulated: what the chain estimates against what the world's file says is true."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from owlight.demodulation import Chain, LaneBelief, demodulate, make_chain
from owlight.simulation.optics import LightSettings, capture_codes
from owlight.simulation.optics.power import beat_frequency_hz
from owlight.simulation.world import LANES, read_world
from owlight.vocabulary.captures import Capture, CaptureId, Lane
from owlight.vocabulary.plan import Signal
from owlight.vocabulary.values import Stamp

WORLD_FILE = Path(__file__).parents[2] / "simulated_instruments" / "world.toml"
OFFSETS = (0, 3178, 9760, 10855)
RANGE_V = 0.4


@pytest.fixture(scope="module")
def world():
    document = read_world(WORLD_FILE.read_text(encoding="utf-8"), WORLD_FILE.name)
    assert not document.problems
    return document.value


@pytest.fixture(scope="module")
def settings():
    return LightSettings(
        signal_on=True,
        signal_power_dbm=10.0,
        signal_wavelength_nm=1550.12,
        lo_on=True,
        lo_power_dbm=13.0,
        lo_wavelength_nm=1550.12,
        attenuation_db=24.0,
        drive_on=True,
        modulation="QPSK",
        symbol_rate_bd=32e9,
        polarisations=2,
        rolloff=0.1,
        pattern_order=15,
        offsets=OFFSETS,
        sample_rate_hz=80e9,
        record_length=250_000,
        ranges_v=(RANGE_V,) * 4,
        coupling="AC",
        bias=True,
        gain_db=0.0,
        gain_control="automatic",
    )


@pytest.fixture(scope="module")
def demodulated(world, settings):
    signal = Signal("QPSK", 32e9, 2, "root raised cosine", 0.1, 15, OFFSETS)
    lanes = tuple(LaneBelief(name, world.receiver.lane_of(name).skew_s, False) for name in LANES)
    chain = Chain.from_text(make_chain("dual polarisation", signal, lanes, None).text)

    def capture(key):
        codes = capture_codes(world, settings, key, 3600.0 * key)
        made = tuple(Lane(n, c, RANGE_V / 256, 0.0, 0.0, f"{key}{n}") for n, c in zip(LANES, codes, strict=True))
        return Capture(CaptureId(0, 1, key), Stamp("", 0.0, 0), 80e9, made, key)

    return {key: demodulate(capture(key), chain) for key in (1, 2, 3)}


def mean_of(demodulated, figures_of, name):
    return float(np.mean([figures_of(found)[name] for found in demodulated.values()]))


def test_every_capture_locks_as_planned(demodulated, figures_of):
    for found in demodulated.values():
        assert (found.status, found.reason) == ("locked", "")
        assert figures_of(found)["off_plan_symbols"] <= 2  # the equaliser's delays differ by a symbol or so
        assert figures_of(found)["slips"] == 0


def test_clock_offset_is_the_world_s(demodulated, figures_of, world):
    # scatter seen: 0.04 ppm a capture
    assert mean_of(demodulated, figures_of, "clock_offset_ppm") == pytest.approx(
        world.oscilloscope.clock_error_ppm, abs=0.15
    )


def test_frequency_offset_is_the_world_s(demodulated, figures_of, world, settings):
    for key, found in demodulated.items():
        true_hz = beat_frequency_hz(world, settings, 3600.0 * key)
        # a line of 100 kHz wanders by about as much in the mean over 3 us
        assert figures_of(found)["frequency_offset_hz"] == pytest.approx(true_hz, abs=0.6e6)


@pytest.mark.parametrize("axis", ["x", "y"])
def test_quadrature_error_is_the_world_s(demodulated, figures_of, world, axis):
    true_deg = getattr(world.receiver, f"quadrature_error_{axis}_deg")
    # scatter seen: 0.14 degrees a capture
    assert mean_of(demodulated, figures_of, f"quadrature_error_{axis}_deg") == pytest.approx(true_deg, abs=0.35)


@pytest.mark.parametrize("axis", ["x", "y"])
def test_no_skew_is_left(demodulated, figures_of, axis):
    # scatter seen: 0.03 ps a capture
    assert mean_of(demodulated, figures_of, f"residual_skew_{axis}_ps") == pytest.approx(0.0, abs=0.1)


def test_linewidth_is_that_of_both_lasers(demodulated, figures_of, world):
    true_hz = world.signal_laser.linewidth_hz + world.local_oscillator.linewidth_hz
    # some 130 independent steps a capture
    assert mean_of(demodulated, figures_of, "linewidth_hz") == pytest.approx(true_hz, rel=0.4)


def test_counts_agree_with_the_measured_snr(demodulated):
    from scipy.special import erfc

    for found in demodulated.values():
        expected = np.mean([0.5 * erfc(np.sqrt(10 ** (t.snr_db / 10) / 2)) for t in found.tributaries])
        # 400 errors scatter by 5 %, and 0.1 dB of SNR is 10 % of the ratio
        assert found.errors / found.bits == pytest.approx(expected, rel=0.25)
