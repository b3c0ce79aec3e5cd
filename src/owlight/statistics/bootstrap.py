"""A parametric bootstrap where a parameter ends at its bound, and no normal theory holds.

A. C. Davison, D. V. Hinkley, Bootstrap Methods and their Application, Cambridge 1997, section 5.2: the studentised
form, which takes the uncertain scatter of few stays into account.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Protocol

import numpy as np

from owlight.statistics.curve import Floats, crossing, pooled
from owlight.statistics.fit import Fit, Task, fit
from owlight.vocabulary.seeds import seed_for

REPLICATES = 400
_NODES = 3


class Crossed(Protocol):
    """A fit that crosses its threshold."""

    @property
    def task(self) -> Task: ...
    @property
    def found(self) -> Fit: ...
    @property
    def log_power(self) -> float: ...
    @property
    def u_db(self) -> float: ...
    @property
    def threshold_ber(self) -> float: ...


def bootstrap_t(fitted: Crossed, coverage: float, seed: int) -> tuple[float, float]:
    """How far the interval reaches below and above the estimate, in dB; infinite where it has no bound."""
    task = replace(fitted.task, counts=fitted.task.counts.with_errors(_draw(fitted, seed)), nodes=_NODES)
    again = fit(task)
    share = task.counts.bits.sum(axis=0) / task.counts.bits.sum()
    log_power, gradient, _ = crossing(task.table, again.parameters, again.imbalance, share, fitted.threshold_ber)
    u = np.sqrt(np.einsum("ri,rij,rj->r", gradient, again.covariance, gradient))
    deviation = (log_power - fitted.log_power) / u
    # a replicate whose curve never comes down to the threshold lies beyond any power
    deviation = np.where(np.isnan(log_power) | ~again.converged, np.inf, deviation)
    tail = 0.5 * (1.0 - coverage)
    low, high = np.quantile(deviation, [tail, 1.0 - tail], method="higher")
    return float(high * fitted.u_db), float(-low * fitted.u_db)


def _draw(fitted: Crossed, seed: int) -> Floats:
    """Counts (REPLICATES, N, G) of the fitted curve: a shift for each stay, then binomial errors."""
    random = np.random.default_rng(seed_for(seed, "bootstrap"))
    counts, found = fitted.task.counts, fitted.found
    shift_db = random.normal(0.0, found.tau_db[0], (REPLICATES, len(counts.power_w)))
    log_power = counts.log_power + shift_db * np.log(10.0) / 10.0
    converter = counts.converter[:, None]
    each = pooled(fitted.task.table, found.parameters, found.imbalance, log_power, counts.share, converter)
    drawn = random.binomial(counts.bits.astype(np.int64), np.exp(each.log_ber_each))
    return np.asarray(drawn, dtype=np.float64)
