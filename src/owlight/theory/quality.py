"""Q factor and error vector magnitude: other ways of saying SNR, with the convention in the name."""

from __future__ import annotations

import math

from owlight.theory.ber import bits_per_symbol

PEAK_TO_AVERAGE_SQUARED: dict[str, float] = {
    "BPSK": 1.0,
    "QPSK": 1.0,
    "16QAM": 9 / 5,
    "64QAM": 7 / 3,
    "256QAM": 45 / 17,
}
"""Peak over average power; R. Schmogrow et al., IEEE Photonics Technology Letters 24(1), 61, 2012."""


def ber_of_q(q: float) -> float:
    """erfc(Q/sqrt(2))/2 of a binary decision with the linear Q factor `q`.

    >>> f"{ber_of_q(6.0):.4e}"
    '9.8659e-10'
    """
    return 0.5 * math.erfc(q / math.sqrt(2.0))


def q_of_ber(ber: float) -> float:
    """The linear Q factor of a binary decision with this BER; ValueError outside (0, 0.5).

    >>> round(q_of_ber(1e-9), 5)
    5.99781
    """
    from scipy.special import ndtri

    if not 0.0 < ber < 0.5:
        raise ValueError(f"A BER of {ber} has no Q factor; give one above 0 and below 0.5")
    return -float(ndtri(ber))


def q_db(q: float) -> float:
    """20 log10 Q, the optical convention; ValueError at zero or below.

    >>> round(q_db(6.0), 3)
    15.563
    """
    if not q > 0.0:
        raise ValueError(f"Q = {q} has no value in dB")
    return 20.0 * math.log10(q)


def snr_db_of_evm(evm_percent: float) -> float:
    """Es/N0 in dB from the data-aided EVM normalised to the average reference power (Shafik et al., ICECE 2006).

    >>> snr_db_of_evm(10.0)
    20.0
    """
    if not evm_percent > 0.0:
        raise ValueError(f"An EVM of {evm_percent} % has no SNR")
    return -20.0 * math.log10(evm_percent / 100.0)


def evm_percent_of_snr_db(snr_db: float) -> float:
    """EVM in percent, normalised to the average reference power.

    >>> evm_percent_of_snr_db(20.0)
    10.0
    """
    return 100.0 * float(10.0 ** (-snr_db / 20.0))


def evm_percent_of_peak(evm_percent: float, modulation: str) -> float:
    """The same error vector normalised to the outermost point: smaller by the square root of the peak-to-average ratio.

    >>> round(evm_percent_of_peak(17.393, "16QAM"), 3)
    12.964
    """
    bits_per_symbol(modulation)  # an unknown name fails with the list of known ones
    return evm_percent / math.sqrt(PEAK_TO_AVERAGE_SQUARED[modulation])
