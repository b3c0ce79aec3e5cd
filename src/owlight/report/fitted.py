"""The fitted curve as numbers."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from owlight.theory import ber_of_snr_db
from owlight.vocabulary.result import Sensitivity

Floats = npt.NDArray[np.float64]


def fitted_ber(found: Sensitivity, modulation: str, power_dbm: Floats) -> Floats:
    """BER at each received power from 1/SNR = a/P + b + c P of each polarisation; the mean of their BERs."""
    power_w = 1e-3 * 10 ** (power_dbm / 10)
    ber_of = ber_of_snr_db(modulation)
    each = [
        ber_of(-10 * np.log10(a_w / power_w + found.curve_b + found.curve_c_per_w * power_w)) for a_w in found.curve_a_w
    ]
    return np.asarray(np.mean(each, axis=0))


def deviation_db(found: Sensitivity, modulation: str, received_power_dbm: float, ber: float) -> float | None:
    """By how many dB of power a stay's BER lies to the right of the curve; None off its ends."""
    power_dbm = np.linspace(received_power_dbm - 3.0, received_power_dbm + 3.0, 601)
    log_ber = np.log(np.maximum(fitted_ber(found, modulation, power_dbm), 1e-300))
    wanted = np.log(ber)
    if not log_ber[-1] < wanted < log_ber[0]:
        return None
    return float(received_power_dbm - np.interp(-wanted, -log_ber, power_dbm))
