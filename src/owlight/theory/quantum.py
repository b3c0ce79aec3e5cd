"""How few photons suffice when shot noise is the only noise.

Sources: G. P. Agrawal, Fiber-Optic Communication Systems, 3rd ed., Wiley 2002, chapter 10;
S. Kumar, M. J. Deen, Fiber Optic Communications, Wiley 2014, chapter 7.
"""

from __future__ import annotations

import math

from owlight.quantity import dbm, optical_frequency_hz
from owlight.theory.ber import bits_per_symbol, required_snr_db
from owlight.theory.quality import q_of_ber

PLANCK_J_S = 6.626_070_15e-34  # exact, SI 2019

# BER = erfc(sqrt(factor * N))/2 or exp(-factor * N)/2, N photons per mark; the average is that times `filled`
_GAUSSIAN = {
    "PSK homodyne": (2.0, 1.0),
    "PSK heterodyne": (1.0, 1.0),
    "ASK homodyne": (0.5, 0.5),
    "ASK heterodyne": (0.25, 0.5),
    "FSK heterodyne": (0.5, 1.0),
}
_EXPONENTIAL = {
    "ASK heterodyne asynchronous": (0.25, 0.5),
    "FSK heterodyne asynchronous": (0.5, 1.0),
    "DPSK heterodyne": (1.0, 1.0),
    "OOK direct detection": (1.0, 0.5),
}
DETECTIONS = (*_GAUSSIAN, *_EXPONENTIAL)


def photons_per_bit(detection: str, ber: float, efficiency: float = 1.0) -> float:
    """Average photons per bit at the quantum limit of a binary format; ValueError for an unknown `detection`.

    `detection` is one of DETECTIONS; Agrawal 2002, tables 10.1 and 10.2.

    >>> round(photons_per_bit("PSK homodyne", 1e-9)), round(photons_per_bit("PSK heterodyne", 1e-9))
    (9, 18)
    """
    if detection in _GAUSSIAN:
        factor, filled = _GAUSSIAN[detection]
        marked = q_of_ber(ber) ** 2 / 2.0 / factor
    elif detection in _EXPONENTIAL:
        factor, filled = _EXPONENTIAL[detection]
        marked = math.log(0.5 / ber) / factor
    else:
        raise ValueError(f"There is no detection {detection!r}; the known ones are {', '.join(DETECTIONS)}")
    return filled * marked / efficiency


def photons_per_symbol(modulation: str, ber: float, efficiency: float = 1.0) -> float:
    """Photons in one symbol of one polarisation that a phase-diverse receiver needs: there Es/N0 is that number.

    K. Kikuchi, Journal of Lightwave Technology 34(1), 157, 2016 (from memory): Es/N0 = efficiency * Ps/(h nu Rs).

    >>> round(photons_per_symbol("QPSK", 3.8e-3), 4)
    7.1254
    """
    return float(10.0 ** (required_snr_db(modulation, ber) / 10.0)) / efficiency


def shot_noise_limit_dbm(
    modulation: str,
    ber: float,
    symbol_rate_bd: float,
    wavelength_nm: float,
    polarisations: int,
    efficiency: float = 1.0,
) -> float:
    """Total received power in dBm, all polarisations summed, below which no phase-diverse receiver reaches `ber`.

    >>> round(shot_noise_limit_dbm("QPSK", 3.8e-3, 32e9, 1550.0, polarisations=1), 3)
    -45.343
    """
    photon_j = PLANCK_J_S * optical_frequency_hz(wavelength_nm)
    each_w = photons_per_symbol(modulation, ber, efficiency) * symbol_rate_bd * photon_j
    return dbm(polarisations * each_w)


def photons_in_a_bit(modulation: str, ber: float) -> float:
    """Photons per information bit at the phase-diverse shot-noise limit.

    >>> round(photons_in_a_bit("QPSK", 1e-9), 3)
    17.987
    """
    return photons_per_symbol(modulation, ber) / bits_per_symbol(modulation)
