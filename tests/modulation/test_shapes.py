"""Constellations and pulses against closed forms and a general communications library."""

from __future__ import annotations

import komm
import numpy as np
import pytest

from owlight.modulation import bits_of_labels, constellation, root_raised_cosine, root_raised_cosine_spectrum


@pytest.mark.parametrize("modulation", ["QPSK", "16QAM", "64QAM", "256QAM"])
def test_neighbours_differ_in_one_bit(modulation: str) -> None:
    points = constellation(modulation)
    distance = np.abs(points[:, None] - points[None, :])
    nearest = np.isclose(distance, distance[distance > 1e-9].min())
    for a, b in np.argwhere(nearest):
        assert int(a ^ b).bit_count() == 1


@pytest.mark.parametrize("modulation", ["BPSK", "QPSK", "16QAM", "64QAM", "256QAM"])
def test_average_power_is_one(modulation: str) -> None:
    assert np.mean(np.abs(constellation(modulation)) ** 2) == pytest.approx(1.0, rel=1e-12)


def test_labels_hold_i_bits_first() -> None:
    points, bits = constellation("16QAM"), bits_of_labels(np.arange(16), 4)
    assert np.array_equal(bits[:, 0] == 1, points.real > 0)
    assert np.array_equal(bits[:, 2] == 1, points.imag > 0)


@pytest.mark.parametrize("rolloff", [0.05, 0.1, 0.2, 0.5, 1.0])
def test_pulse_equals_library(rolloff: float) -> None:
    times = np.linspace(-8, 8, 1601)
    theirs = komm.RaisedCosinePulse(rolloff).root().waveform(times)
    # the library normalises by the peak of the raised cosine, which is the same unit energy
    assert np.allclose(root_raised_cosine(times, rolloff), theirs, atol=1e-9)


@pytest.mark.parametrize("rolloff", [0.1, 0.2, 0.5])
def test_matched_pair_has_no_intersymbol_interference(rolloff: float) -> None:
    per_symbol, span = 8, 256
    pulse = root_raised_cosine(np.arange(-span * per_symbol, span * per_symbol + 1) / per_symbol, rolloff)
    pair = np.convolve(pulse, pulse)[::per_symbol] / per_symbol
    middle = len(pair) // 2
    rest = np.delete(pair, middle)
    assert pair[middle] == pytest.approx(1.0, abs=2e-4)  # the cut at 256 symbols leaves this much
    assert np.abs(rest).max() < 1e-3


@pytest.mark.parametrize("rolloff", [0.1, 0.5])
def test_spectrum_is_transform_of_pulse(rolloff: float) -> None:
    times = np.arange(-400, 400, 0.05)
    pulse = root_raised_cosine(times, rolloff)
    for frequency in (0.0, 0.3, 0.5, 0.52):
        direct = np.sum(pulse * np.cos(2 * np.pi * frequency * times)) * 0.05
        # the pulse cut at 400 symbols rings by about 1e-3 at the band edge
        assert direct == pytest.approx(root_raised_cosine_spectrum(frequency, rolloff)[0], abs=2e-3)
