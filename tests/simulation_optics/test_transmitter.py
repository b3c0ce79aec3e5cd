"""Pattern, pulse and resampling, against direct sums in the time domain."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from owlight.modulation import constellation, pattern, root_raised_cosine
from owlight.simulation.optics.fields import Instants, modulated
from owlight.simulation.optics.transmitter import fraction_of, shaped, start_of, symbols, with_noise
from owlight.simulation.world import Path

rng = np.random.default_rng(20240601)


@pytest.mark.parametrize("rolloff", [0.1, 0.35, 1.0])
@pytest.mark.parametrize("step", [0.4, 0.4 * (1 - 2e-6), 1 / np.pi])
def test_waveform_is_the_sum_of_pulses(rolloff, step):
    block = rng.choice([-1.0, 1.0], 1200) + 1j * rng.choice([-1.0, 1.0], 1200)
    instants = 300
    found = shaped(block, rolloff, 550.3, step, instants)
    t = 550.3 + step * np.arange(instants)
    expected = (
        root_raised_cosine((t[:, None] - np.arange(1200)[None, :]).ravel(), rolloff).reshape(instants, 1200) @ block
    )
    # the sum lacks the pulses beyond its ends: tails fall as 1/t^2, to 2e-4 of a symbol at 500 symbols and roll-off 0.1
    np.testing.assert_allclose(found, expected, atol=2e-3 if rolloff < 0.2 else 2e-4)


def test_waveform_has_unit_power():
    block = symbols_of(4000)
    found = shaped(block, 0.1, 0.0, 0.5, 8000)
    assert np.mean(np.abs(found) ** 2) == pytest.approx(1.0, rel=0.01)


def symbols_of(count):
    return (rng.choice([-1.0, 1.0], count) + 1j * rng.choice([-1.0, 1.0], count)) / np.sqrt(2)


def test_long_record_keeps_its_timing():
    """A drift of the chirp's phase over 100,000 symbols would show as a timing error at the end."""
    block = symbols_of(100_800)
    step = 0.4 * (1 - 2e-6)
    found = shaped(block, 0.1, 256.0, step, 250_000)
    t = 256.0 + step * (250_000 - 50 + np.arange(40))
    near = np.arange(100_800 - 700, 100_800)
    expected = root_raised_cosine((t[:, None] - near[None, :]).ravel(), 0.1).reshape(40, -1) @ block[near]
    np.testing.assert_allclose(found[-50:-10], expected, atol=3e-3)  # the direct sum ends after 500 symbols


def test_record_is_a_part_of_a_longer_one(ideal, settings):
    """Were the waveform circular, its ends would depend on its length."""
    short, long = (modulated(ideal, settings(), 3, 0.0, Instants(count, 80e9, 0))[0] for count in (8000, 20_000))
    np.testing.assert_allclose(short, long[:8000], atol=3e-3)  # tails of pulses 256 symbols away


@pytest.mark.parametrize("order", [7, 15, 31])
def test_tributaries_follow_one_pattern(settings, order):
    s = settings(pattern_order=order, offsets=(0, 31, 64, 101))
    sent = symbols(s, 5, 300)
    bits = pattern(order, 1000 if order > 23 else None)
    for axis in (0, 1):
        for part, offset in ((sent[axis].real, s.offsets[2 * axis]), (sent[axis].imag, s.offsets[2 * axis + 1])):
            expected = bits[(5 + offset + np.arange(300)) % bits.size]
            np.testing.assert_array_equal(part > 0, expected == 1)


def test_levels_take_bits_in_turn(settings):
    s = settings(modulation="16QAM", offsets=(0, 40, 80, 120))
    bits, sent = pattern(15), symbols(s, 3, 50)
    for k in range(50):
        i, q = bits[3 + 2 * k : 5 + 2 * k], bits[43 + 2 * k : 45 + 2 * k]
        assert sent[0, k] == constellation("16QAM")[8 * i[0] + 4 * i[1] + 2 * q[0] + q[1]]


def test_pattern_too_long_to_hold_is_refused(settings):
    with pytest.raises(ValueError, match="of order 31 reach bit"):
        symbols(settings(pattern_order=31, offsets=(0, 2_000_000_000, 0, 0)), 1, 10)


def test_trigger_and_pattern_start_anywhere(settings):
    starts = [start_of(settings(), key) for key in range(200)]
    assert min(starts) > 0
    assert len(set(starts)) > 190
    assert np.std([fraction_of(key) for key in range(200)]) == pytest.approx(12**-0.5, rel=0.15)  # uniform


def test_noise_keeps_the_power():
    block = symbols_of(50_000)
    noisy = with_noise(block, 10.0, rng)
    assert np.mean(np.abs(noisy) ** 2) == pytest.approx(1.0, rel=0.01)
    gain = np.vdot(block, noisy) / np.vdot(block, block)
    snr = abs(gain) ** 2 / np.mean(np.abs(noisy - gain * block) ** 2)
    assert 10 * np.log10(snr) == pytest.approx(10.0, abs=0.1)


def test_group_delay_splits_the_axes(ideal, settings):
    s = replace(settings(), offsets=(0, 3178, 0, 3178))  # the same data in both polarisations
    at = Instants(20_000, 80e9, 0)
    delay_s = 6e-12
    slow, fast = modulated(replace(ideal, path=Path(group_delay_difference_s=delay_s)), s, 4, 0.0, at)
    window = np.hanning(at.count)
    cross = np.fft.fft(fast * window) * np.fft.fft(slow * window).conj()
    f = np.fft.fftfreq(at.count, 1 / 80e9)
    inside = np.abs(f) < 15e9
    slope = np.sum(np.abs(cross[inside]) * f[inside] * np.angle(cross[inside])) / np.sum(
        np.abs(cross[inside]) * f[inside] ** 2
    )
    assert slope / (2 * np.pi) == pytest.approx(delay_s, rel=1e-3)
