"""The curve model and its derivatives, for many parameter sets at once.

1/SNR = a/P + b + c*P for each polarisation: a is receiver noise, b everything that scales with the signal, c the
direct detection that a finite balance leaves. The pooled BER is the mean of the polarisations' BERs, never the BER of
a mean SNR. A local fit replaces this by a power law, 1/SNR = a*P^-beta, in the neighbourhood of the threshold.
Array axes: replicate, stay, (quadrature node,) polarisation. Powers are relative to `reference_w`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
import numpy.typing as npt

from owlight.statistics.request import BerOfSnrDb
from owlight.vocabulary.result import Stay

Floats = npt.NDArray[np.float64]

LN_A, FLOOR, RESIDUE, BETA = range(4)
PHYSICAL = (LN_A, FLOOR)
PHYSICAL_WITH_RESIDUE = (LN_A, FLOOR, RESIDUE)
LOCAL = (LN_A, BETA)
LOWEST_DB, HIGHEST_DB, STEP_DB = -30.0, 45.0, 0.005
_DB = np.log(10.0) / 10.0
_LEAST_LOG_BER = np.log(1e-290)


@dataclass(frozen=True, eq=False)
class BerTable:
    """log(BER) over SNR in dB and its slope; linear between entries 0.005 dB apart, good to 1e-5 of the BER."""

    log_ber: Floats
    slope_per_db: Floats

    def at(self, inverse_snr: Floats) -> tuple[Floats, Floats]:
        """log(BER) and its derivative by log(1/SNR)."""
        place = (-10.0 * np.log10(inverse_snr) - LOWEST_DB) / STEP_DB
        place = np.clip(place, 0.0, len(self.log_ber) - 1.001)
        below = place.astype(np.intp)
        share = place - below
        left, slope = self.log_ber[below], self.slope_per_db[below]
        value = left + share * (self.log_ber[below + 1] - left)
        # the slope is interpolated as well: if it jumped from entry to entry, a fit could circle round a corner
        return value, (slope + share * (self.slope_per_db[below + 1] - slope)) * (-1.0 / _DB)


@lru_cache(maxsize=8)
def tabulate(ber_of_snr_db: BerOfSnrDb) -> BerTable:
    snr_db = np.arange(LOWEST_DB, HIGHEST_DB, STEP_DB)
    log_ber = np.log(np.maximum(ber_of_snr_db(snr_db), 1e-300))
    log_ber = np.maximum(log_ber, _LEAST_LOG_BER)
    return BerTable(log_ber, np.gradient(log_ber, STEP_DB))


@dataclass(frozen=True, eq=False)
class Counts:
    """Counts of N stays in G polarisations: power (N), errors (R, N, G) and bits (N, G), known converter noise (N)."""

    power_w: Floats
    power_u_db: Floats
    errors: Floats
    bits: Floats
    converter: Floats
    point: npt.NDArray[np.int64]

    @property
    def reference_w(self) -> float:
        return float(np.exp(np.mean(np.log(self.power_w))))

    @property
    def log_power(self) -> Floats:
        return np.asarray(np.log(self.power_w / self.reference_w))

    @property
    def share(self) -> Floats:
        return np.asarray(self.bits / self.bits.sum(axis=1, keepdims=True))

    def with_errors(self, errors: Floats) -> Counts:
        return Counts(self.power_w, self.power_u_db, errors, self.bits, self.converter, self.point)

    def with_power(self, power_w: Floats) -> Counts:
        return Counts(power_w, self.power_u_db, self.errors, self.bits, self.converter, self.point)


def counts_of(stays: tuple[Stay, ...], converter_noise: Mapping[tuple[int, int], float]) -> Counts:
    """One row a stay; a polarisation is what precedes I or Q in a tributary's name."""
    names = sorted({t.name.rstrip("IQ") for stay in stays for t in stay.tributaries})
    errors = np.zeros((1, len(stays), len(names)))
    bits = np.zeros((len(stays), len(names)))
    for row, stay in enumerate(stays):
        for tributary in stay.tributaries:
            column = names.index(tributary.name.rstrip("IQ"))
            errors[0, row, column] += tributary.errors
            bits[row, column] += tributary.bits
    return Counts(
        power_w=np.array([stay.received_power_w for stay in stays]),
        power_u_db=np.array([stay.received_power_u_db for stay in stays]),
        errors=errors,
        bits=bits,
        converter=np.array([converter_noise.get((stay.point, stay.attempt), 0.0) for stay in stays]),
        point=np.array([stay.point for stay in stays], dtype=np.int64),
    )


@dataclass(frozen=True, eq=False)
class Pooled:
    """The pooled BER m and how it moves: `by_shift` is d ln m / d dB of power, `by_parameter` stacks the four."""

    log_ber: Floats
    by_shift: Floats
    by_parameter: Floats
    log_ber_each: Floats
    by_imbalance_each: Floats


def pooled(
    table: BerTable, parameters: Floats, imbalance: Floats, log_power: Floats, share: Floats, converter: Any = 0.0
) -> Pooled:
    """Parameters (R, 4), imbalance (R), log_power (R or 1, N, ...), share (N, G) or (G): arrays (R, N, ...[, G]).

    `imbalance` is the log of the ratio of the two polarisations' a; half of it goes to each.
    """
    extra = (None,) * (log_power.ndim - 1)
    ln_a, b, c, beta = (parameters[(slice(None), which, *extra, None)] for which in (LN_A, FLOOR, RESIDUE, BETA))
    sides = np.array([0.5, -0.5])[: share.shape[-1]] if share.shape[-1] > 1 else np.zeros(1)
    log_p = log_power[..., None]
    noise = np.exp(ln_a + sides * imbalance[(slice(None), *extra, None)] - beta * log_p)
    residue = c * np.exp(log_p)
    total = noise + b + residue + converter
    log_each, by_log_z = table.at(total)
    shares = share if share.ndim == 1 else share.reshape(share.shape[0], *(1,) * (log_power.ndim - 2), share.shape[1])
    weighted = shares * np.exp(log_each)
    mean = weighted.sum(axis=-1)
    pull = weighted / mean[..., None] * by_log_z / total  # d ln m / d z of each polarisation
    by_noise = (pull * noise).sum(axis=-1)
    log_power_here = np.broadcast_to(log_power, by_noise.shape)
    by_c = (pull * np.exp(log_p)).sum(axis=-1)
    by_shift = (pull * (residue - beta * noise)).sum(axis=-1) * _DB
    by_parameter = np.stack([by_noise, pull.sum(axis=-1), by_c, -log_power_here * by_noise], axis=-1)
    return Pooled(np.log(mean), by_shift, by_parameter, log_each, by_log_z / total * noise * sides)


def crossing(
    table: BerTable, parameters: Floats, imbalance: Floats, share: Floats, threshold_ber: float
) -> tuple[Floats, Floats, Floats]:
    """Where the pooled BER is `threshold_ber`: log power (R), its gradient (R, 4), and d ln BER / d dB (R).

    NaN where the curve never gets there. `share` (G) weighs the polarisations.
    """
    wanted = np.log(threshold_ber)
    log_power = np.zeros((len(parameters), 1))
    for _ in range(60):  # Newton on a falling, nearly straight function of dB; a floor shows as a vanishing slope
        found = pooled(table, parameters, imbalance, log_power, share)
        with np.errstate(divide="ignore", invalid="ignore"):
            step_db = np.clip((wanted - found.log_ber) / found.by_shift, -5.0, 5.0)
        step_db = np.where(np.isfinite(step_db), step_db, 0.0)
        log_power = log_power + step_db * _DB
        if np.max(np.abs(step_db)) < 1e-9:
            break
    found = pooled(table, parameters, imbalance, log_power, share)
    reached = (np.abs(found.log_ber - wanted) < 1e-6) & (found.by_shift < 0.0)
    with np.errstate(divide="ignore", invalid="ignore"):
        gradient = -found.by_parameter / (found.by_shift / _DB)[..., None]
    log_power = np.where(reached, log_power, np.nan)
    return log_power[:, 0], gradient[:, 0, :], found.by_shift[:, 0]
