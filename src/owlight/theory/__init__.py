"""What an ideal receiver would do: formulas of the trade and nothing measured.

Knows no simulation and no statistics, so that both can be held against it.
"""

from owlight.theory.ber import MODULATIONS, ber_of_snr_db, bits_per_symbol, required_snr_db, slope_decades_per_db
from owlight.theory.quantum import photons_per_bit, photons_per_symbol, shot_noise_limit_dbm
from owlight.theory.receiver import ReceiverBelief, predicted_noise, predicted_sensitivity_dbm
from owlight.theory.thresholds import THRESHOLDS, Threshold, threshold

__all__ = [
    "MODULATIONS",
    "THRESHOLDS",
    "ReceiverBelief",
    "Threshold",
    "ber_of_snr_db",
    "bits_per_symbol",
    "photons_per_bit",
    "photons_per_symbol",
    "predicted_noise",
    "predicted_sensitivity_dbm",
    "required_snr_db",
    "shot_noise_limit_dbm",
    "slope_decades_per_db",
    "threshold",
]
