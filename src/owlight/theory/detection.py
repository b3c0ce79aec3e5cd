"""Balanced detection as the textbooks work it: photocurrents, noise densities and the Q factor that follows.

Source: S. Kumar, M. J. Deen, Fiber Optic Communications: Fundamentals and Applications, Wiley 2014, chapter 7
(equations 7.30 to 7.63). Powers stand at the coupler's inputs; a pair is both diodes of one balanced receiver.
"""

from __future__ import annotations

import math

ELECTRON_C = 1.602_176_634e-19  # exact, SI 2019
BOLTZMANN_J_PER_K = 1.380_649e-23  # exact, SI 2019


def balanced_currents_a(
    responsivity_a_per_w: float, signal_w: float, lo_w: float, phase_rad: float
) -> tuple[float, float]:
    """Photocurrents of the two diodes behind a 3 dB coupler: equal constant terms, beat terms of opposite sign.

    >>> plus, minus = balanced_currents_a(1.0, 1e-6, 1e-2, 0.0)
    >>> f"{plus - minus:.3e}", f"{plus + minus:.6e}"
    ('2.000e-04', '1.000100e-02')
    """
    constant = 0.5 * responsivity_a_per_w * (signal_w + lo_w)
    beat = responsivity_a_per_w * math.sqrt(signal_w * lo_w) * math.cos(phase_rad)
    return constant + beat, constant - beat


def balanced_current_a(responsivity_a_per_w: float, signal_w: float, lo_w: float, phase_rad: float = 0.0) -> float:
    """The difference of the two: 2 R sqrt(Ps Plo) cos(phase), free of any constant term.

    >>> round(balanced_current_a(0.874, 3.98e-8, 1e-2), 8)  # example after equation 7.69: 3.48e-2 mA
    3.487e-05
    """
    return 2.0 * responsivity_a_per_w * math.sqrt(signal_w * lo_w) * math.cos(phase_rad)


def shot_noise_a2_per_hz(current_a: float) -> float:
    """One-sided density 2 q I of the shot noise of a mean photocurrent.

    >>> f"{shot_noise_a2_per_hz(1e-3):.4e}"
    '3.2044e-22'
    """
    return 2.0 * ELECTRON_C * current_a


def thermal_noise_a2_per_hz(temperature_k: float, load_ohm: float) -> float:
    """One-sided density 4 k T / R of a load resistor.

    >>> round(thermal_noise_a2_per_hz(290.0, 50.0) ** 0.5 * 1e12, 2)  # pA/sqrt(Hz)
    17.9
    """
    return 4.0 * BOLTZMANN_J_PER_K * temperature_k / load_ohm


def lo_intensity_noise_a2_per_hz(pair_current_a: float, rin_db_per_hz: float, balance_db: float) -> float:
    """One-sided density of the local oscillator's relative intensity noise that balancing leaves.

    `balance_db` is 20 log10 of the residual fraction of the pair's current, negative or zero.

    >>> f"{lo_intensity_noise_a2_per_hz(1e-3, -145.0, -20.0):.3e}"
    '3.162e-23'
    """
    if balance_db > 0.0:
        raise ValueError(f"A balance of {balance_db} dB would amplify what it should cancel; give zero or less")
    residual_a = pair_current_a * float(10.0 ** (balance_db / 20.0))
    return float(10.0 ** (rin_db_per_hz / 10.0)) * residual_a**2


def lo_current_of_least_noise_a(thermal_a_per_sqrt_hz: float, rin_db_per_hz: float, balance_db: float) -> float:
    """The pair's photocurrent at which the residual intensity noise equals the thermal noise: the best one.

    More local oscillator no longer helps there. B. Zhang et al., Optics Express 20(3), 2012 (abstract).

    >>> round(lo_current_of_least_noise_a(20e-12, -145.0, -20.0) * 1e3, 3)  # mA
    3.557
    """
    return thermal_a_per_sqrt_hz / float(10.0 ** ((rin_db_per_hz + balance_db) / 20.0))


def on_off_q(current_a: float, noise_density_a2_per_hz: float, bandwidth_hz: float) -> float:
    """Q of on-off keying, homodyne, same noise in mark and space: I / (2 sigma).

    >>> round(on_off_q(3.4877e-5, 2.2206e-11 / 7.5e9, 7.5e9), 1)
    3.7
    """
    return current_a / (2.0 * math.sqrt(noise_density_a2_per_hz * bandwidth_hz))


def phase_shift_q(current_a: float, noise_density_a2_per_hz: float, bandwidth_hz: float) -> float:
    """Q of binary phase-shift keying, homodyne, with levels of plus and minus `current_a`: I / sigma.

    >>> round(phase_shift_q(2.4691e-5, 2.2206e-11 / 7.5e9, 7.5e9), 2)
    5.24
    """
    return current_a / math.sqrt(noise_density_a2_per_hz * bandwidth_hz)


def clearance_penalty_db(clearance_db: float, total_over_electronic: bool) -> float:
    """SNR lost to electronic noise for a shot-noise clearance, which people define in two ways.

    `total_over_electronic`: light on over light off; otherwise shot noise alone over electronic noise.

    >>> round(clearance_penalty_db(10.0, True), 3), round(clearance_penalty_db(10.0, False), 3)
    (0.458, 0.414)
    """
    ratio = 10.0 ** (-clearance_db / 10.0)
    if not total_over_electronic:
        return 10.0 * math.log10(1.0 + ratio)
    if not ratio < 1.0:
        raise ValueError("A total over electronic noise of 0 dB or less leaves no shot noise")
    return -10.0 * math.log10(1.0 - ratio)
