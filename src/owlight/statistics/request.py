"""What a sensitivity is asked from, and the answer when there is none."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from owlight.vocabulary.result import BudgetLine, Stay

BerOfSnrDb = Callable[[npt.ArrayLike], npt.NDArray[np.float64]]


@dataclass(frozen=True)
class SensitivityRequest:
    """Stays of one group and what turns them into a sensitivity.

    `common` are uncertainties that all powers share, in dB; they are added once. `meter_zero_u_w` is the standard
    uncertainty of the meter's zero, in watts at the meter. `vertical` is "fixed" or "follow"; for "follow" the known
    converter noise of a stay, as a part of 1/SNR, stands in `converter_noise` under (point, attempt).
    `with_residue` adds c*P for the direct detection that a finite balance leaves.
    """

    stays: tuple[Stay, ...]
    threshold_ber: float
    ber_of_snr_db: BerOfSnrDb
    common: tuple[BudgetLine, ...] = ()
    meter_zero_u_w: float | None = None
    seed: int = 0
    vertical: str = "fixed"
    converter_noise: Mapping[tuple[int, int], float] = field(default_factory=dict)
    with_residue: bool = False


@dataclass(frozen=True)
class Reason:
    """Why there is no sensitivity, in words for people."""

    words: str
