"""What a phase-diverse receiver should reach with the noise its data sheet states.

One polarisation gets half the local oscillator in a dual-polarisation receiver; its hybrid splits that over two
balanced pairs. A pair's beat current has the amplitude R sqrt(Ps Plo) of the powers at its hybrid, and its noise is
the sum of one-sided densities: shot noise of the pair's mean current, thermal noise, residual intensity noise.
Derivation with field sums and square-law diodes: K. Kikuchi, Journal of Lightwave Technology 34(1), 157, 2016.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

from owlight.quantity import dbm, watts
from owlight.theory.ber import required_snr_db
from owlight.theory.detection import lo_intensity_noise_a2_per_hz, shot_noise_a2_per_hz

REFERENCE = "receiver's predicted noise"


@dataclass(frozen=True)
class ReceiverBelief:
    """Stated figures of a receiver.

    `responsivity_a_per_w` is all the current of one polarisation's four diodes per watt at its hybrid: a diode's
    responsivity times the excess loss, the splitting not included. `lo_power_dbm` is at the receiver's LO port.
    `lane_noise_a_per_sqrt_hz` is amplifier and converter noise of one lane, referred to its balanced pair.
    `balance_db` is 20 log10 of the fraction of a pair's current that balancing leaves.
    `ceiling_snr_db` is what transmitter and converter allow at any power; None for no ceiling.
    """

    responsivity_a_per_w: float
    lo_power_dbm: float
    lane_noise_a_per_sqrt_hz: float
    polarisations: int
    rin_db_per_hz: float | None = None
    balance_db: float = 0.0
    ceiling_snr_db: float | None = None


def responsivity_from_port(port_to_diode_a_per_w: float, polarisations: int) -> float:
    """Responsivity without the splitting, from the current of one diode per watt at the port of the receiver.

    >>> responsivity_from_port(0.1, polarisations=2)
    0.8
    """
    return port_to_diode_a_per_w * 4 * polarisations


def lane_noise_a2_per_hz(receiver: ReceiverBelief) -> float:
    """One-sided current density of one dark lane: the local oscillator on, the signal blocked.

    >>> belief = ReceiverBelief(0.8, 13.0, 20e-12, 2)
    >>> f"{lane_noise_a2_per_hz(belief):.3e}"
    '1.679e-21'
    """
    pair_a = _pair_current_a(receiver)
    density = shot_noise_a2_per_hz(pair_a) + receiver.lane_noise_a_per_sqrt_hz**2
    if receiver.rin_db_per_hz is not None:
        density += lo_intensity_noise_a2_per_hz(pair_a, receiver.rin_db_per_hz, receiver.balance_db)
    return density


def predicted_noise(receiver: ReceiverBelief, symbol_rate_bd: float) -> tuple[float, float]:
    """The curve 1/SNR = a/P + b of this receiver: (a in W of total received power, b).

    With a strong local oscillator and nothing but shot noise, a is `polarisations` photons per symbol time.
    b holds the signal's own shot noise and the ceiling.

    >>> a_w, b = predicted_noise(ReceiverBelief(0.8, 13.0, 20e-12, 2), 32e9)
    >>> f"{a_w:.3e}", f"{b:.1e}"
    ('1.683e-08', '6.4e-07')
    """
    lo_each_w = watts(receiver.lo_power_dbm) / receiver.polarisations
    gain = receiver.responsivity_a_per_w**2 * lo_each_w
    a_w = receiver.polarisations * lane_noise_a2_per_hz(receiver) * symbol_rate_bd / gain
    signal_shot = shot_noise_a2_per_hz(0.5 * receiver.responsivity_a_per_w)  # per watt of signal at the hybrid
    b = signal_shot * symbol_rate_bd / gain
    if receiver.ceiling_snr_db is not None:
        b += 10.0 ** (-receiver.ceiling_snr_db / 10.0)
    return a_w, b


def predicted_sensitivity_dbm(receiver: ReceiverBelief, modulation: str, ber: float, symbol_rate_bd: float) -> float:
    """Total received power in dBm at which this receiver should reach `ber`; ValueError where its ceiling forbids it.

    >>> round(predicted_sensitivity_dbm(ReceiverBelief(0.8, 13.0, 20e-12, 2), "QPSK", 3.8e-3, 32e9), 2)
    -39.21
    """
    a_w, b = predicted_noise(receiver, symbol_rate_bd)
    allowed = 10.0 ** (-required_snr_db(modulation, ber) / 10.0)
    if b >= allowed:
        raise ValueError(f"A ceiling of {-10 * math.log10(b):.2f} dB keeps {modulation} above a BER of {ber:g}")
    return dbm(a_w / (allowed - b))


def _pair_current_a(receiver: ReceiverBelief) -> float:
    return receiver.responsivity_a_per_w * watts(receiver.lo_power_dbm) / (2 * receiver.polarisations)
