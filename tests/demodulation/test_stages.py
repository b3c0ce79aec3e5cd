"""Stages one by one: the fused pass against plain single-purpose forms, quality figures against published values."""

from __future__ import annotations

import numpy as np
import pytest

from owlight.demodulation import (
    ClockEstimate,
    Front,
    blind_taps,
    block_lengths,
    generalised_mutual_information,
    matched_filter,
    signal_to_noise,
)
from owlight.demodulation.stages.counting import count
from owlight.demodulation.stages.synchronisation import Match, Reference
from owlight.modulation import root_raised_cosine_spectrum

# from integration by Gauss and Hermite of the two binary channels of Gray QPSK (A. Alvarado et al., Journal of
# Lightwave Technology 33(20), 4338, 2015, definition)
GMI_OF_SNR_DB = {0.0: 0.9719, 3.0: 1.4413, 5.0: 1.7184, 7.0: 1.9014, 10.0: 1.9935}


def noisy_qpsk(snr_db, count, seed=1):
    rng = np.random.default_rng(seed)
    sent = (rng.choice([-1, 1], count) + 1j * rng.choice([-1, 1], count)) / np.sqrt(2)
    noise = (rng.standard_normal(count) + 1j * rng.standard_normal(count)) * np.sqrt(10 ** (-snr_db / 10) / 2)
    return (sent + noise).astype(np.complex64), sent.astype(np.complex64)


@pytest.mark.parametrize(("snr_db", "bits"), GMI_OF_SNR_DB.items())
def test_mutual_information_is_as_published(snr_db, bits):
    y, sent = noisy_qpsk(snr_db, 400_000)
    # 400,000 symbols scatter by 0.0015 bit at 0 dB
    assert generalised_mutual_information(3j * y, sent) == pytest.approx(bits, abs=0.005)


@pytest.mark.parametrize("snr_db", [0.0, 8.6, 20.0])
def test_snr_is_unbiased_whatever_the_gain(snr_db):
    y, sent = noisy_qpsk(snr_db, 200_000)
    assert signal_to_noise(y * np.complex64(0.3 - 2j), sent) == pytest.approx(snr_db, abs=0.03)  # 3 sigma


@pytest.mark.parametrize(
    ("samples_a_symbol", "limit_db"),
    # others than exact ratios drift inside a block by up to a hundredth of a symbol
    [(2.5, -50), (50 / 28, -50), (4.0, -50), (80 / 31.7898, -45), (2.5 * (1 + 30e-6), -45), (2.5 * (1 - 90e-6), -45)],
)
def test_fused_pass_equals_plain_stages(samples_a_symbol, limit_db):
    """Deskew, Gram-Schmidt, carrier, matched filter and resampling, each alone over the whole record, in float64."""
    rng, samples, fs, rs = np.random.default_rng(3), 60_000, 80e9, 80e9 / samples_a_symbol
    f = np.fft.fftfreq(samples, 1 / fs)
    band = np.abs(f) < 0.55 * rs
    lanes = np.fft.ifft(np.fft.fft(rng.standard_normal((2, samples))) * band).real
    matrix, skews_s, first = np.array([[0.9, 0.0], [0.05, 1.1]]), (1e-12, -3e-12), 123.4
    clock = ClockEstimate(first, samples_a_symbol, 0.0, 0.0, 1.0)
    length, _ = block_lengths(samples_a_symbol, 4096)
    centre_hz = 20 * fs / length
    front = Front(fs, rs, 0.1, skews_s, matrix[None], centre_hz, clock)
    fused = matched_filter((lanes[0] + 1j * lanes[1]).astype(np.complex64)[None, :], front)[0]
    # plain
    on_time = np.fft.ifft(np.fft.fft(lanes) * np.exp(2j * np.pi * f * np.array(skews_s)[:, None])).real
    straight = matrix @ on_time
    moved = (straight[0] + 1j * straight[1]) * np.exp(-2j * np.pi * centre_hz * np.arange(samples) / fs)
    shaped = np.fft.fft(moved) * root_raised_cosine_spectrum(f / rs, 0.1)
    start = first + samples_a_symbol * np.ceil(64 - first / samples_a_symbol)
    chosen = np.arange(2000, 25_000, 171)  # in all parts of blocks, away from the record's ends
    plain = np.array(
        [np.mean(shaped * np.exp(2j * np.pi * f * (start + k * samples_a_symbol / 2) / fs)) for k in chosen]
    )
    gain = np.vdot(plain, fused[chosen]) / np.vdot(plain, plain)
    error = np.sum(np.abs(fused[chosen] - gain.real * plain) ** 2) / np.sum(np.abs(gain * plain) ** 2)
    assert 10 * np.log10(error) < limit_db


def test_blind_outputs_never_share_a_polarisation():
    for seed in range(12):
        rng = np.random.default_rng(seed)
        sent = (rng.choice([-1, 1], (2, 6000)) + 1j * rng.choice([-1, 1], (2, 6000))) / np.sqrt(2)
        angle, between = np.pi / 4 + 0.05 * rng.standard_normal(), np.exp(2j * np.pi * rng.random())
        c, s = np.cos(angle), np.sin(angle) * between
        mixed = np.array([[c, s], [-np.conj(s), c]]) @ np.repeat(sent, 2, axis=1)
        mixed = mixed + 0.25 * (rng.standard_normal(mixed.shape) + 1j * rng.standard_normal(mixed.shape))
        _, figures = blind_taps(mixed.astype(np.complex64), 2, 11, 5000, 2e-3)
        assert figures["output_likeness"] < 0.2


def test_slips_are_found_and_left_in():
    rng = np.random.default_rng(4)
    signs = rng.choice([-1, 1], (2, 8192)).astype(np.int8)
    reference = Reference(signs, (0, 1), (0, 0), True, 8192)
    pair = (Match(0, 0, 1, 1.0, 0.0, 0), Match(1, 0, 1, 1.0, 0.0, 0))
    y = (signs[0] + 1j * signs[1]).astype(np.complex64)
    y[3072:6144] *= 1j
    found = count(y, pair, reference, np.arange(8192), 1024)
    assert (found.slips, found.errors_without_slips) == (2, 0)
    assert sum(found.errors) == pytest.approx(3072, abs=150)  # half of 6,144 bits, binomial
