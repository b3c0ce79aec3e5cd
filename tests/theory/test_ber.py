"""BER formulas against an integration that shares nothing with them, and against figures published elsewhere."""

import math

import numpy as np
import pytest
from scipy.integrate import quad

from owlight.theory import MODULATIONS, ber_of_snr_db, bits_per_symbol, required_snr_db, slope_decades_per_db

# Levels of one quadrature in the order of the binary-reflected Gray code of F. Gray, US patent 2,632,058 (1953).
LEVELS = {"QPSK": 2, "16QAM": 4, "64QAM": 8, "256QAM": 16}


def integrated_ber(levels: int, snr_db: float) -> float:
    """Each level's noise density integrated over each other level's decision region, times the bits that differ."""
    amplitudes = 2.0 * np.arange(levels) - (levels - 1)
    energy = 2.0 * np.mean(amplitudes**2)  # two quadratures
    sigma = math.sqrt(energy / 10 ** (snr_db / 10) / 2.0)
    bits = int(math.log2(levels))
    total = 0.0
    for sent in range(levels):
        for decided in range(levels):
            differ = bin((sent ^ sent >> 1) ^ (decided ^ decided >> 1)).count("1")
            low = amplitudes[decided] - 1.0 if decided else amplitudes[decided] - 1.0 - 20 * sigma
            high = amplitudes[decided] + 1.0 if decided < levels - 1 else amplitudes[decided] + 1.0 + 20 * sigma
            density = quad(
                lambda x, s=sent: (
                    math.exp(-0.5 * ((x - amplitudes[s]) / sigma) ** 2) / (sigma * math.sqrt(2 * math.pi))
                ),
                low,
                high,
                epsabs=1e-16,
                epsrel=1e-11,
                limit=200,
                points=[amplitudes[sent]] if low < amplitudes[sent] < high else None,
            )[0]
            total += differ * density / (levels * bits)
    return total


@pytest.mark.parametrize("modulation", LEVELS)
@pytest.mark.parametrize("snr_db", [0.0, 6.0, 12.0, 18.0])
def test_formula_equals_numerical_integration(modulation: str, snr_db: float) -> None:
    expected = integrated_ber(LEVELS[modulation], snr_db)
    # 1e-8 relative is what the quadrature reaches; below 1e-12 the integrand is at the quadrature's own floor
    assert float(ber_of_snr_db(modulation)(snr_db)) == pytest.approx(expected, rel=1e-8, abs=1e-13)


# J. G. Proakis, Digital Communications, error probability of binary PSK (from memory): the table's rounding is 0.05 dB.
@pytest.mark.parametrize(("ber", "eb_n0_db"), [(1e-3, 6.8), (1e-4, 8.4), (1e-5, 9.6), (1e-6, 10.5)])
def test_psk_needs_textbook_snr(ber: float, eb_n0_db: float) -> None:
    assert required_snr_db("BPSK", ber) == pytest.approx(eb_n0_db, abs=0.05)
    assert required_snr_db("QPSK", ber) - 10 * math.log10(2) == pytest.approx(eb_n0_db, abs=0.05)


# Net coding gain at an output of 1e-15 = difference of required Eb/N0, less 10 log10 (1 + overhead), as published
# with the input BER: OIF-400ZR (concatenated code, 10.8 dB for 16QAM), OpenZR+ multi-source agreement (open FEC,
# 11.1 dB for QPSK, 11.6 dB for 16QAM), B. P. Smith et al., JLT 30(1), 110, 2012 (staircase, 9.41 dB, binary).
@pytest.mark.parametrize(
    ("modulation", "ber", "overhead", "gain_db"),
    [
        ("16QAM", 1.25e-2, 0.148, 10.8),
        ("QPSK", 2.0e-2, 0.153, 11.1),
        ("16QAM", 2.0e-2, 0.153, 11.6),
        ("BPSK", 4.63e-3, 16 / 239, 9.41),
    ],
)
def test_published_coding_gains_follow(modulation: str, ber: float, overhead: float, gain_db: float) -> None:
    gain = required_snr_db(modulation, 1e-15) - required_snr_db(modulation, ber) - 10 * math.log10(1 + overhead)
    assert gain == pytest.approx(gain_db, abs=0.05)  # one printed decimal


def test_gray_16qam_is_the_printed_sum() -> None:
    """K. Cho, D. Yoon 2002, 16QAM: 3/8 erfc(a) + 1/4 erfc(3a) - 1/8 erfc(5a), a = sqrt(2 Eb/N0 / 5)."""
    snr_db = np.array([3.0, 10.0, 16.0])
    a = np.sqrt(2.0 * 10 ** (snr_db / 10) / 4.0 / 5.0)
    erfc = np.vectorize(math.erfc)
    expected = 3 / 8 * erfc(a) + 1 / 4 * erfc(3 * a) - 1 / 8 * erfc(5 * a)
    np.testing.assert_allclose(ber_of_snr_db("16QAM")(snr_db), expected, rtol=1e-12)


@pytest.mark.parametrize("modulation", MODULATIONS)
@pytest.mark.parametrize("ber", [0.3, 2e-2, 3.8e-3, 1e-9, 1e-15])
def test_required_snr_inverts_ber(modulation: str, ber: float) -> None:
    assert float(ber_of_snr_db(modulation)(required_snr_db(modulation, ber))) == pytest.approx(ber, rel=1e-9)


def test_slopes_of_falling_curves() -> None:
    """Closed form for QPSK: d log10 BER / d dB from the derivative of erfc, worked by hand."""
    for ber in (2e-2, 3.8e-3, 1e-5):
        snr = 10 ** (required_snr_db("QPSK", ber) / 10)
        by_snr = -math.exp(-snr / 2) / math.sqrt(math.pi) / math.sqrt(2) * 0.5 / math.sqrt(snr)
        expected = by_snr * snr * math.log(10) / 10 / ber / math.log(10)
        assert slope_decades_per_db("QPSK", ber) == pytest.approx(expected, rel=1e-6)


def test_counted_noise_agrees_with_formula() -> None:
    """Gray labels made here, noise drawn here, 64QAM at 13 dB: the count lies where the formula says."""
    random = np.random.default_rng(20)
    symbols, levels = 400_000, 8
    sent = random.integers(0, levels, symbols)
    amplitudes = (2.0 * np.arange(levels) - 7) / math.sqrt(21)  # one quadrature with unit power
    received = amplitudes[sent] + random.normal(0.0, 10 ** (-13 / 20), symbols)
    decided = np.clip(np.round((received * math.sqrt(21) + 7) / 2), 0, levels - 1).astype(int)
    differ = np.bitwise_count((sent ^ sent >> 1) ^ (decided ^ decided >> 1)).sum()
    ber = float(ber_of_snr_db("64QAM")(13.0))
    # errors come up to three a symbol, so 5 times the binomial sigma covers 1e-6 and their bunching
    assert abs(differ / (3 * symbols) - ber) < 5 * math.sqrt(ber / (3 * symbols)) * 1.1


def test_unknown_modulation_lists_known() -> None:
    with pytest.raises(ValueError, match="BPSK, QPSK, 16QAM"):
        bits_per_symbol("8QAM")


@pytest.mark.parametrize("ber", [0.0, 0.5, -1e-3, math.nan])
def test_impossible_ber_is_refused(ber: float) -> None:
    with pytest.raises(ValueError, match="no required SNR"):
        required_snr_db("QPSK", ber)
