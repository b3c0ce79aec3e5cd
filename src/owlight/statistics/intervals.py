"""Exact binomial intervals, valid from one error in a trillion bits to half of them wrong.

Source: C. J. Clopper, E. S. Pearson, Biometrika 26, 404-413, 1934. The beta quantile routine in common use returns
a lower limit above the estimate for tiny ratios (2.4 times k/n for 1,000 errors in 1e10 bits, scipy 1.17.1), so every
limit here is solved for and held against the binomial tail it is defined by.
"""

from __future__ import annotations

import math
from collections.abc import Callable


def exact_interval(errors: int, bits: int, coverage: float = 0.95) -> tuple[float, float]:
    """Two-sided Clopper-Pearson interval (low, high) for the error ratio; ValueError for impossible counts.

    Always low <= errors/bits <= high. With zero errors low is 0 and high the limit of the two-sided interval; use
    `upper_limit` where only an upper limit is meant.

    >>> [round(limit, 7) for limit in exact_interval(682, 925)]  # W. J. Conover, Practical Nonparametric Statistics
    [0.7076683, 0.7654066]
    """
    _refuse_impossible(errors, bits, coverage)
    tail = 0.5 * (1.0 - coverage)
    low = _lower(errors, bits, tail)
    high = 1.0 - _lower(bits - errors, bits, tail) if 2 * errors > bits else _upper(errors, bits, tail)
    if not 0.0 <= low <= errors / bits <= high <= 1.0:
        raise ArithmeticError(f"The interval ({low}, {high}) misses its own estimate {errors}/{bits}")
    return low, high


def upper_limit(bits: int, confidence: float = 0.95) -> float:
    """One-sided upper limit for the error ratio when not one error was counted in `bits`.

    >>> round(upper_limit(1_000_000) * 1e6, 4)
    2.9957
    """
    _refuse_impossible(0, bits, confidence)
    return -math.expm1(math.log1p(-confidence) / bits)


def _refuse_impossible(errors: int, bits: int, coverage: float) -> None:
    if bits < 1 or not 0 <= errors <= bits:
        raise ValueError(f"{errors} errors in {bits} bits cannot be; bits are at least 1 and errors at most bits")
    if not 0.0 < coverage < 1.0:
        raise ValueError(f"A coverage of {coverage} cannot be; give a number between 0 and 1, such as 0.95")


def _upper(errors: int, bits: int, tail: float) -> float:
    """The ratio at which so few errors or fewer have the probability `tail`."""
    if errors == 0:
        return -math.expm1(math.log(tail) / bits)
    from scipy.special import betainc, chdtri

    # P(X <= k) = 1 - I_p(k+1, n-k); the Poisson limit (F. Garwood, Biometrika 28, 437, 1936) lies a little above
    bracket = min(1.0, 1.01 * 0.5 * float(chdtri(2 * errors + 2, tail)) / bits)
    return _root(lambda p: 1.0 - tail - float(betainc(errors + 1, bits - errors, p)), errors / bits, bracket)


def _lower(errors: int, bits: int, tail: float) -> float:
    """The ratio at which so many errors or more have the probability `tail`."""
    if errors == 0:
        return 0.0
    if errors == bits:
        return math.exp(math.log(tail) / bits)
    from scipy.special import betainc, chdtri

    # P(X >= k) = I_p(k, n-k+1); the Poisson limit lies a little below
    bracket = 0.99 * 0.5 * float(chdtri(2 * errors, 1.0 - tail)) / bits
    return _root(lambda p: float(betainc(errors, bits - errors + 1, p)) - tail, bracket, errors / bits)


def _root(excess: Callable[[float], float], low: float, high: float) -> float:
    from scipy.optimize import brentq

    return float(brentq(excess, low, high, xtol=1e-300, rtol=1e-14))
