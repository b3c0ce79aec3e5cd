"""Bit-error ratio of Gray-labelled BPSK and square QAM in white Gaussian noise, and its inverse.

Source: K. Cho, D. Yoon, "On the general BER expression of one- and two-dimensional amplitude modulations",
IEEE Transactions on Communications 50(7), 1074-1080, 2002: exact, every bit of every label.
SNR is Es/N0 of one polarisation, N0 the noise of both quadratures in one symbol.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from functools import cache

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]
BerOfSnrDb = Callable[[npt.ArrayLike], Floats]

MODULATIONS: dict[str, int] = {"BPSK": 2, "QPSK": 4, "16QAM": 16, "64QAM": 64, "256QAM": 256}
"""Name and number of constellation points."""

_LOWEST_SNR_DB = -60.0
_HIGHEST_SNR_DB = 80.0


def bits_per_symbol(modulation: str) -> int:
    """Bits in one symbol of one polarisation; ValueError for an unknown name.

    >>> bits_per_symbol("QPSK"), bits_per_symbol("16QAM")
    (2, 4)
    """
    return int(math.log2(_points(modulation)))


@cache
def ber_of_snr_db(modulation: str) -> BerOfSnrDb:
    """The function that gives the exact BER at an Es/N0 per polarisation in dB (any array shape, float64 out).

    ValueError for an unknown modulation. Cho and Yoon 2002; BPSK and QPSK reduce to erfc(sqrt(Eb/N0))/2.

    >>> float(np.round(ber_of_snr_db("QPSK")(10 + 10 * np.log10(2)), 12))  # Eb/N0 = 10 dB
    3.872108e-06
    """
    weights, arguments = _erfc_terms(modulation)

    def ber(snr_db: npt.ArrayLike) -> Floats:
        from scipy.special import erfc

        root = 10.0 ** (np.asarray(snr_db, dtype=np.float64) / 20.0)
        total = np.zeros_like(root)
        for weight, argument in zip(weights, arguments, strict=True):
            total = total + weight * erfc(argument * root)
        return total

    return ber


def required_snr_db(modulation: str, ber: float) -> float:
    """The Es/N0 per polarisation in dB at which the exact BER is `ber`; ValueError outside (0, 0.4).

    >>> round(required_snr_db("QPSK", 3.8e-3), 4), round(required_snr_db("16QAM", 1.25e-2), 4)
    (8.5281, 13.5493)
    """
    from scipy.optimize import brentq

    if not 0.0 < ber < 0.4:
        raise ValueError(f"A BER of {ber} has no required SNR here; give one above 0 and below 0.4")
    wanted = math.log(ber)
    formula = ber_of_snr_db(modulation)

    def excess(snr_db: float) -> float:
        found = float(formula(snr_db))
        return (math.log(found) if found > 0.0 else -800.0) - wanted

    return float(brentq(excess, _LOWEST_SNR_DB, _HIGHEST_SNR_DB, xtol=1e-12))


def slope_decades_per_db(modulation: str, ber: float) -> float:
    """How steeply log10 of the BER changes with the SNR in dB where the BER is `ber`; negative.

    >>> round(slope_decades_per_db("QPSK", 3.8e-3), 3)
    -0.397
    """
    snr_db = required_snr_db(modulation, ber)
    step_db = 1e-4
    above, below = np.log10(ber_of_snr_db(modulation)([snr_db + step_db, snr_db - step_db]))
    return float(above - below) / (2.0 * step_db)


def _points(modulation: str) -> int:
    if modulation not in MODULATIONS:
        raise ValueError(f"There is no modulation {modulation!r}; the known ones are {', '.join(MODULATIONS)}")
    return MODULATIONS[modulation]


def _erfc_terms(modulation: str) -> tuple[tuple[float, ...], tuple[float, ...]]:
    """BER = sum of weight * erfc(argument * sqrt(Es/N0)): equations 14 and 16 of Cho and Yoon, collected."""
    points = _points(modulation)
    if points == 2:
        return (0.5,), (1.0,)
    levels = math.isqrt(points)
    bits = int(math.log2(levels))
    scale = math.sqrt(3.0 / (2.0 * (points - 1)))
    collected: dict[int, float] = {}
    for bit in range(1, bits + 1):
        for i in range(levels - (levels >> bit)):
            step = i * 2 ** (bit - 1)
            sign = -1.0 if (step // levels) % 2 else 1.0
            share = sign * (2 ** (bit - 1) - math.floor(step / levels + 0.5)) / (levels * bits)
            collected[i] = collected.get(i, 0.0) + share
    kept = {i: share for i, share in collected.items() if share}
    return tuple(kept.values()), tuple((2 * i + 1) * scale for i in kept)
