"""The fitted curve as numbers, for whoever draws it."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from owlight.quantity import watts


def fitted_ber(sensitivity: dict[str, Any], modulation: str, powers_dbm: Sequence[float]) -> list[float]:
    """BER of the curve model 1/SNR = a/P + b + c P, pooled over the polarisations, at each received power."""
    import numpy as np

    from owlight.theory import ber_of_snr_db

    ber_of = ber_of_snr_db(modulation)
    powers_w = np.array([watts(power_dbm) for power_dbm in powers_dbm])
    pooled = np.zeros(len(powers_w))
    for a_w in sensitivity["curve_a_w"]:
        inverse = a_w / powers_w + sensitivity["curve_b"] + sensitivity["curve_c_per_w"] * powers_w
        pooled += np.asarray(ber_of(-10 * np.log10(inverse)))
    return [float(value) for value in pooled / len(sensitivity["curve_a_w"])]
