"""Nights drawn at count level: true powers, a shift a stay, binomial errors. Shares no formula with the package."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.special import erfc

from owlight.vocabulary.captures import Tributary
from owlight.vocabulary.result import Stay

METER_OVER_PLANE = 9.0  # the meter sits on the large arm of the tap


def qpsk_ber(snr: np.ndarray) -> np.ndarray:
    return 0.5 * erfc(np.sqrt(snr / 2.0))


def qpsk_ber_of_snr_db(snr_db: np.ndarray) -> np.ndarray:
    return qpsk_ber(10.0 ** (np.asarray(snr_db) / 10.0))


@dataclass(frozen=True)
class Design:
    """A bench and a plan: what is true of them. `imbalance_db` is the difference of the polarisations' noise."""

    powers_dbm: tuple[float, ...] = tuple(np.linspace(-40.5, -36.5, 9))
    passes: int = 3
    bits: int = 400_000
    threshold_ber: float = 3.8e-3
    truth_dbm: float = -38.5
    floor: float = 0.01
    imbalance_db: float = 0.3
    scatter_db: float = 0.05
    reading_db: float = 0.01
    drift: Callable[[float], float] = field(default=lambda power_w: 1.0)

    def inverse_snr(self, power_w: float) -> np.ndarray:
        sides = 10.0 ** (np.array([0.5, -0.5]) * self.imbalance_db / 10.0)

        def excess(log_a: float) -> float:
            at_truth = math.exp(log_a) * sides / self._truth_w + self.floor
            return float(qpsk_ber(1.0 / at_truth).mean()) - self.threshold_ber

        a = math.exp(brentq(excess, math.log(self._truth_w) - 9.0, math.log(self._truth_w) + 1.0))
        return (a * sides / power_w + self.floor) * self.drift(power_w)

    @property
    def _truth_w(self) -> float:
        return 1e-3 * 10 ** (self.truth_dbm / 10)

    def night(self, random: np.random.Generator) -> tuple[Stay, ...]:
        """Powers as a meter without any common error reads them."""
        stays = []
        for attempt in range(1, self.passes + 1):
            for point in random.permutation(len(self.powers_dbm)):
                true_w = 1e-3 * 10 ** ((self.powers_dbm[point] + random.normal(0.0, 0.05)) / 10)
                read_w = true_w * 10 ** (random.normal(0.0, self.reading_db) / 10)
                bers = qpsk_ber(1.0 / self.inverse_snr(true_w * 10 ** (random.normal(0.0, self.scatter_db) / 10)))
                names = (("XI", "XQ"), ("YI", "YQ"))
                each = self.bits // 4
                tributaries = tuple(
                    Tributary(name, each, int(random.binomial(each, ber)))
                    for pair, ber in zip(names, bers, strict=True)
                    for name in pair
                )
                tap_w = read_w * METER_OVER_PLANE
                read = (read_w, self.reading_db, tap_w, tap_w)
                stays.append(Stay(int(point), attempt, len(stays), "", False, "pass", *read, tributaries, 1, 1))
        return tuple(stays)


def misread(stays: tuple[Stay, ...], common_db: float, zero_w: float) -> tuple[Stay, ...]:
    """The same night read by a meter that is wrong by a factor, and by a zero in watts at the meter."""

    def wrong(power_w: float) -> float:
        return (power_w * METER_OVER_PLANE * 10 ** (common_db / 10) + zero_w) / METER_OVER_PLANE

    return tuple(
        replace(
            stay,
            received_power_w=wrong(stay.received_power_w),
            tap_before_w=wrong(stay.received_power_w) * METER_OVER_PLANE,
            tap_after_w=wrong(stay.received_power_w) * METER_OVER_PLANE,
        )
        for stay in stays
    )


@pytest.fixture(scope="session")
def design() -> type[Design]:
    return Design


@pytest.fixture(scope="session")
def misread_night() -> Callable[..., tuple[Stay, ...]]:
    return misread


@pytest.fixture(scope="session")
def qpsk() -> Callable[[np.ndarray], np.ndarray]:
    return qpsk_ber_of_snr_db
