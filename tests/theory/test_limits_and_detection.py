"""Quantum limits, worked photocurrent and noise examples, Q and EVM, each beside its source."""

import math

import numpy as np
import pytest
from scipy import constants

from owlight.quantity import watts
from owlight.theory import (
    THRESHOLDS,
    ReceiverBelief,
    photons_per_bit,
    predicted_noise,
    predicted_sensitivity_dbm,
    required_snr_db,
    shot_noise_limit_dbm,
    threshold,
)
from owlight.theory.detection import (
    BOLTZMANN_J_PER_K,
    ELECTRON_C,
    balanced_current_a,
    balanced_currents_a,
    clearance_penalty_db,
    lo_current_of_least_noise_a,
    lo_intensity_noise_a2_per_hz,
    on_off_q,
    phase_shift_q,
    shot_noise_a2_per_hz,
    thermal_noise_a2_per_hz,
)
from owlight.theory.quality import (
    PEAK_TO_AVERAGE_SQUARED,
    ber_of_q,
    evm_percent_of_peak,
    evm_percent_of_snr_db,
    q_db,
    q_of_ber,
    snr_db_of_evm,
)
from owlight.theory.quantum import DETECTIONS, PLANCK_J_S
from owlight.theory.receiver import lane_noise_a2_per_hz, responsivity_from_port

# G. P. Agrawal, Fiber-Optic Communication Systems, 3rd ed. 2002, tables 10.1 and 10.2 (from memory); homodyne rows
# also S. Kumar, M. J. Deen 2014, pages 308 and 310: photons per bit, averaged, at a BER of 1e-9.
QUANTUM_LIMITS = {
    "PSK homodyne": 9,
    "PSK heterodyne": 18,
    "ASK homodyne": 18,
    "ASK heterodyne": 36,
    "FSK heterodyne": 36,
    "ASK heterodyne asynchronous": 40,
    "FSK heterodyne asynchronous": 40,
    "DPSK heterodyne": 20,
    "OOK direct detection": 10,
}


@pytest.mark.parametrize("detection", DETECTIONS)
def test_quantum_limit_is_tabulated(detection: str) -> None:
    assert photons_per_bit(detection, 1e-9) == pytest.approx(QUANTUM_LIMITS[detection], abs=0.5)  # whole photons


def test_hybrid_costs_three_decibels() -> None:
    """A 90-degree hybrid sees half the light of a phase-locked receiver a quadrature: Agrawal 2002, chapter 10."""
    assert photons_per_bit("PSK heterodyne", 1e-3) == pytest.approx(2 * photons_per_bit("PSK homodyne", 1e-3))


# P = Ns Rs h nu at 1550 nm worked with mpmath at 30 digits from the exact constants: dBm per polarisation.
@pytest.mark.parametrize(
    ("modulation", "ber", "symbol_rate_bd", "power_dbm"),
    [
        ("QPSK", 3.8e-3, 32e9, -45.343),
        ("QPSK", 1e-9, 10e9, -43.363),
        ("16QAM", 1.25e-2, 59.84375e9, -37.603),
        ("64QAM", 1e-3, 28e9, -31.902),
        ("QPSK", 2e-2, 64e9, -44.610),
    ],
)
def test_shot_noise_limit_is_counted_photons(modulation, ber, symbol_rate_bd, power_dbm) -> None:
    single = shot_noise_limit_dbm(modulation, ber, symbol_rate_bd, 1550.0, 1)
    assert single == pytest.approx(power_dbm, abs=6e-4)  # three printed decimals
    both = shot_noise_limit_dbm(modulation, ber, symbol_rate_bd, 1550.0, 2)
    assert both - single == pytest.approx(10 * math.log10(2))


def test_poisson_counts_reach_the_limit() -> None:
    """Photons counted on four diodes behind a hybrid, nothing Gaussian assumed: QPSK, 6 photons a symbol."""
    random = np.random.default_rng(5)
    symbols, signal, lo = 300_000, 6.0, 1e5
    bits = random.integers(0, 2, (2, symbols))
    phase = np.arctan2(1 - 2 * bits[1], 1 - 2 * bits[0])
    beats = [math.sqrt(signal * lo) * np.cos(phase), math.sqrt(signal * lo) * np.sin(phase)]
    errors = 0
    for bit, beat in zip(bits, beats, strict=True):
        plus = random.poisson((signal + lo) / 4 + beat / 2)
        minus = random.poisson((signal + lo) / 4 - beat / 2)
        errors += int(((plus - minus < 0) != (bit == 1)).sum())
    expected = 0.5 * math.erfc(math.sqrt(signal / 2))
    # 5 sigma of the count; the local oscillator is finite: signal/lo = 6e-5 of the noise
    assert abs(errors - 2 * symbols * expected) < 5 * math.sqrt(2 * symbols * expected)


def test_constants_are_the_exact_ones() -> None:
    assert constants.h == PLANCK_J_S
    assert constants.e == ELECTRON_C
    assert constants.k == BOLTZMANN_J_PER_K


def test_worked_on_off_example() -> None:
    """Kumar and Deen 2014, page 312, equations 7.69 to 7.76: I1 = 3.48e-2 mA, variance 2.22e-11 A^2, Q = 3.7."""
    signal_w, lo_w, responsivity, bandwidth_hz = watts(-44.0), 10e-3, 0.874, 7.5e9
    current = balanced_current_a(responsivity, signal_w, lo_w)
    density = shot_noise_a2_per_hz(responsivity * lo_w) + thermal_noise_a2_per_hz(290.0, 100.0)
    assert current == pytest.approx(3.48e-5, rel=5e-3)  # the book rounds the power to three digits first
    assert density * bandwidth_hz == pytest.approx(2.22e-11, rel=5e-3)
    assert on_off_q(current, density, bandwidth_hz) == pytest.approx(3.7, abs=0.05)


def test_worked_phase_shift_example() -> None:
    """Kumar and Deen 2014, page 313, equations 7.80 to 7.90: I1 = 2.46e-2 mA, Q = 5.23, shot noise alone 5.38."""
    signal_w, lo_w, responsivity, bandwidth_hz = watts(-47.0), 10e-3, 0.874, 7.5e9
    current = balanced_current_a(responsivity, signal_w, lo_w)
    shot = shot_noise_a2_per_hz(responsivity * lo_w)
    density = shot + thermal_noise_a2_per_hz(290.0, 100.0)
    assert current == pytest.approx(2.46e-5, rel=5e-3)
    assert phase_shift_q(current, density, bandwidth_hz) == pytest.approx(5.23, abs=0.02)
    assert phase_shift_q(current, shot, bandwidth_hz) == pytest.approx(5.38, abs=0.02)


def test_balanced_pair_cancels_constant_terms() -> None:
    plus, minus = balanced_currents_a(0.9, 2e-6, 5e-3, 1.1)
    assert plus - minus == pytest.approx(balanced_current_a(0.9, 2e-6, 5e-3, 1.1))
    assert plus + minus == pytest.approx(0.9 * (2e-6 + 5e-3))


def test_thermal_equals_shot_near_one_milliampere() -> None:
    """50 ohm at 290 K: the crossover 2kT/(qR) is 50 mV over 50 ohm, 0.99961 mA."""
    current = 2 * constants.k * 290.0 / (constants.e * 50.0)
    assert shot_noise_a2_per_hz(current) == pytest.approx(thermal_noise_a2_per_hz(290.0, 50.0))


def test_best_current_balances_thermal_and_intensity_noise() -> None:
    best = lo_current_of_least_noise_a(20e-12, -145.0, -12.0)
    assert lo_intensity_noise_a2_per_hz(best, -145.0, -12.0) == pytest.approx((20e-12) ** 2)
    totals = [((20e-12) ** 2 + lo_intensity_noise_a2_per_hz(best * f, -145.0, -12.0)) / f for f in (0.9, 1.0, 1.1)]
    assert totals[1] == min(totals)  # noise over signal gain is least there


def test_clearance_is_defined_two_ways() -> None:
    # light-on over light-off of 10 dB is shot over electronic of 10 log10(9) dB: the same receiver, the same penalty
    assert clearance_penalty_db(10.0, True) == pytest.approx(clearance_penalty_db(10 * math.log10(9.0), False))


def test_ideal_receiver_predicts_shot_noise_limit() -> None:
    responsivity = constants.e * 1550e-9 / (constants.h * constants.c)  # one electron a photon
    for polarisations in (1, 2):
        belief = ReceiverBelief(responsivity, 20.0, 0.0, polarisations)
        predicted = predicted_sensitivity_dbm(belief, "QPSK", 3.8e-3, 32e9)
        limit = shot_noise_limit_dbm("QPSK", 3.8e-3, 32e9, 1550.0, polarisations)
        assert predicted == pytest.approx(limit, abs=1e-4)  # the signal's own shot noise is all that is left


def test_thermal_noise_costs_its_share() -> None:
    """Thermal noise as large as shot noise doubles the needed power: 3.01 dB."""
    quiet = ReceiverBelief(0.8, 13.0, 0.0, 2)
    noisy = ReceiverBelief(0.8, 13.0, math.sqrt(lane_noise_a2_per_hz(quiet)), 2)
    difference = predicted_sensitivity_dbm(noisy, "QPSK", 3.8e-3, 32e9) - predicted_sensitivity_dbm(
        quiet, "QPSK", 3.8e-3, 32e9
    )
    assert difference == pytest.approx(10 * math.log10(2), abs=1e-3)


def test_ceiling_counts_as_constant_noise() -> None:
    belief = ReceiverBelief(0.8, 13.0, 20e-12, 2, -145.0, -20.0, ceiling_snr_db=15.0)
    a_w, b = predicted_noise(belief, 32e9)
    power_w = watts(predicted_sensitivity_dbm(belief, "QPSK", 3.8e-3, 32e9))
    assert 10 * math.log10(1 / (a_w / power_w + b)) == pytest.approx(required_snr_db("QPSK", 3.8e-3))
    with pytest.raises(ValueError, match="ceiling"):
        predicted_sensitivity_dbm(belief, "64QAM", 3.8e-3, 32e9)


def test_port_responsivity_includes_splitting() -> None:
    # eight diodes share the light of a dual-polarisation receiver's port evenly, four that of a single one
    assert responsivity_from_port(0.05, 2) == pytest.approx(0.4)
    assert responsivity_from_port(0.05, 1) == pytest.approx(0.2)


# Standard normal quantiles: M. Abramowitz, I. A. Stegun, Handbook of Mathematical Functions, table 26.5 (from memory).
@pytest.mark.parametrize(("ber", "q"), [(1e-2, 2.32635), (1e-3, 3.09023), (1e-4, 3.71902), (1e-5, 4.26489)])
def test_q_is_normal_quantile(ber: float, q: float) -> None:
    assert q_of_ber(ber) == pytest.approx(q, abs=6e-6)
    assert ber_of_q(q_of_ber(ber)) == pytest.approx(ber, rel=1e-12)


def test_q_six_and_decibel_convention() -> None:
    assert ber_of_q(6.0) == pytest.approx(9.865876450377e-10, rel=1e-12)  # komm 0.37, gaussian_q(6)
    # 20 log10 Q of QPSK is its Es/N0 in dB
    assert q_db(q_of_ber(3.8e-3)) == pytest.approx(required_snr_db("QPSK", 3.8e-3))


def test_evm_conventions() -> None:
    assert evm_percent_of_snr_db(snr_db_of_evm(17.393)) == pytest.approx(17.393)
    for modulation, levels in {"QPSK": 2, "16QAM": 4, "64QAM": 8, "256QAM": 16}.items():
        amplitudes = 2.0 * np.arange(levels) - (levels - 1)
        assert PEAK_TO_AVERAGE_SQUARED[modulation] == pytest.approx(amplitudes.max() ** 2 / np.mean(amplitudes**2))
    assert evm_percent_of_peak(10.0, "64QAM") == pytest.approx(10.0 / math.sqrt(7 / 3))


def test_thresholds_know_their_source() -> None:
    assert threshold("concatenated FEC, 14.8 % overhead").ber == 1.25e-2
    assert all(entry.source and 0 < entry.ber < 0.1 and 0 < entry.overhead < 1 for entry in THRESHOLDS.values())
    with pytest.raises(KeyError, match="open FEC"):
        threshold("open FECs")


@pytest.mark.parametrize(
    ("name", "symbol_bits", "n", "t", "output"),
    [("Reed-Solomon (255, 239)", 8, 255, 8, 1e-15), ("Reed-Solomon (544, 514)", 10, 544, 15, 1e-15)],
)
def test_reed_solomon_threshold_gives_its_output(name, symbol_bits, n, t, output) -> None:
    """Bounded-distance decoding of independent errors: S. Lin, D. J. Costello, Error Control Coding (from memory)."""
    p = threshold(name).ber
    p_symbol = -math.expm1(symbol_bits * math.log1p(-p))
    after = sum(i / n * math.comb(n, i) * p_symbol**i * (1 - p_symbol) ** (n - i) for i in range(t + 1, n + 1))
    # the printed input has three digits, and the output moves about nine to sixteen times as fast
    assert after * p / p_symbol == pytest.approx(output, rel=0.1)
