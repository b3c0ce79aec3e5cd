"""Coupler fields, square law and balanced subtraction against the textbooks' currents, noises and Q factors.

[KD] S. Kumar, M. J. Deen, Fiber Optic Communications: Fundamentals and Applications, Wiley 2014, chapter 7.
[KK] K. Kikuchi, Fundamentals of coherent optical fiber communications, J. Lightwave Technol. 34(1), 157, 2016.
A hybrid's branch is a 3 dB coupler that gets half of each power; [KD] counts powers at that coupler.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from owlight.simulation.optics.keys import generator
from owlight.simulation.optics.receiver import balanced_a, pair_of, responsivities
from owlight.simulation.world import Lane, Receiver

PHASES = np.linspace(0.0, 2.0 * np.pi, 361)
SIGNAL_W, LO_W, R = 2e-6, 5e-3, 0.874
QUADRATURE = math.pi / 2


def branch(signal_w, lo_w, phase=PHASES, turn=0.0, responsivity=(R, R)):
    signal = math.sqrt(signal_w) * np.exp(1j * np.asarray(phase))
    return pair_of(signal, np.full(signal.size, math.sqrt(lo_w)), turn, responsivity, signal.size)


def test_beat_terms_have_opposite_sign():
    pair = branch(2 * SIGNAL_W, 2 * LO_W)
    # [KD] 7.30 and 7.31: (R/2)(Ps + Plo +- 2 sqrt(Ps Plo) cos); tolerance: rounding
    constant = R / 2 * (SIGNAL_W + LO_W)
    beat = R * math.sqrt(SIGNAL_W * LO_W) * np.cos(PHASES)
    np.testing.assert_allclose(pair.plus_a, constant + beat, rtol=1e-12)
    np.testing.assert_allclose(pair.minus_a, constant - beat, rtol=1e-12)


def test_balanced_difference_has_no_constant():
    pair = branch(2 * SIGNAL_W, 2 * LO_W)
    difference = pair.plus_a - pair.minus_a
    # [KD] 7.32: 2 R sqrt(Ps Plo) cos; the constant of 2e-3 A cancels to rounding
    expected = 2 * R * math.sqrt(SIGNAL_W * LO_W) * np.cos(PHASES)
    np.testing.assert_allclose(difference, expected, atol=1e-17)
    assert abs(np.mean(difference[:-1])) < 1e-17


def test_second_branch_gives_the_quadrature():
    real, imaginary = branch(SIGNAL_W, LO_W), branch(SIGNAL_W, LO_W, turn=QUADRATURE)
    found = (real.plus_a - real.minus_a) + 1j * (imaginary.plus_a - imaginary.minus_a)
    # [KK] section III: R sqrt(Ps Plo) (cos, sin) of the powers at the hybrid's ports
    np.testing.assert_allclose(found, R * math.sqrt(SIGNAL_W * LO_W) * np.exp(1j * PHASES), atol=1e-17)


def test_quadrature_error_turns_the_second_branch():
    error = math.radians(7.0)
    pair = branch(SIGNAL_W, LO_W, turn=QUADRATURE + error)
    expected = R * math.sqrt(SIGNAL_W * LO_W) * np.sin(PHASES - error)
    np.testing.assert_allclose(pair.plus_a - pair.minus_a, expected, atol=1e-17)


def test_energy_of_a_hybrid_is_kept():
    branches = [branch(SIGNAL_W, LO_W, turn=turn, responsivity=(1.0, 1.0)) for turn in (0.0, QUADRATURE)]
    total = sum(pair.plus_a + pair.minus_a for pair in branches)
    np.testing.assert_allclose(total, SIGNAL_W + LO_W, rtol=1e-12)  # four outputs hold all that entered


# Ratio of diode responsivities for a rejection of 20 log10 |R+ - R-|/(R+ + R-), the definition of the OIF agreements
# on coherent receivers (from memory); ratios by that formula.
@pytest.mark.parametrize(
    ("rejection_db", "ratio"),
    [(10, 1.9250), (12, 1.6709), (16, 1.3767), (20, 1.2222), (25, 1.1192), (30, 1.0653)],
)
def test_rejection_follows_the_diode_ratio(rejection_db, ratio):
    pair_r = responsivities(Receiver(responsivity_a_per_w=R), Lane(common_mode_rejection_db=float(rejection_db)))
    assert pair_r[0] / pair_r[1] == pytest.approx(ratio, abs=1e-4)  # printed to four digits
    lit = pair_of(None, np.full(1, math.sqrt(LO_W)), 0.0, pair_r, 1)  # one port lit, no beat
    left = (lit.plus_a - lit.minus_a) / (lit.plus_a + lit.minus_a)
    assert -20 * math.log10(left[0]) == pytest.approx(rejection_db, abs=1e-9)
    assert (lit.plus_a + lit.minus_a)[0] == pytest.approx(R * LO_W / 2)  # the mean responsivity stays


# [KD] page 312 (on-off keying) and page 313 (phase-shift keying): R 0.874 A/W, LO 10 mW, 7.5 GHz, 290 K, 100 ohm.
@pytest.mark.parametrize(
    ("signal_w", "current_a", "levels", "q"),
    [(3.98e-8, 3.48e-5, 2.0, 3.7), (1.995e-8, 2.46e-5, 1.0, 5.23)],
    ids=["on-off", "phase-shift"],
)
def test_published_receiver_examples(signal_w, current_a, levels, q):
    count, rate_hz = 400_000, 15e9  # noise white up to half the rate: 7.5 GHz
    thermal = math.sqrt(4 * 1.380649e-23 * 290 / 100)
    receiver = Receiver(thermal_noise_a_per_sqrt_hz=thermal)
    pair = branch(2 * signal_w, 2 * 1e-2, phase=np.zeros(count))
    current = balanced_a(receiver, pair, generator(1, "example"), rate_hz)
    assert np.mean(current) == pytest.approx(current_a, rel=5e-3)  # printed to three digits
    # published 2.22e-11 A^2; its own standard deviation here is sqrt(2/count) = 0.22 %, and three of it
    assert np.var(current) == pytest.approx(2.22e-11, rel=0.01)
    assert np.mean(current) / (levels * np.std(current)) == pytest.approx(q, rel=5e-3)


def test_shot_noise_is_that_of_two_diodes():
    count, rate_hz = 200_000, 80e9
    pair = branch(1e-9, LO_W, phase=np.zeros(count), responsivity=(1.0, 0.5))
    noise = balanced_a(Receiver(), pair, generator(2, "shot"), rate_hz) - (pair.plus_a - pair.minus_a)
    # one-sided 2 q I (W. Schottky, Annalen der Physik 362, 541, 1918) up to half the rate: q I rate for each diode
    expected = 1.602176634e-19 * rate_hz * (pair.plus_a[0] + pair.minus_a[0])
    assert np.var(noise) == pytest.approx(expected, rel=0.013)  # four standard deviations
