"""Exact intervals against the handbook, two libraries, and the tails that define them."""

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.stats import binom, binomtest, chi2, poisson
from statsmodels.stats.proportion import proportion_confint

from owlight.statistics import exact_interval, upper_limit

# k, n, coverage, low, high. First row: NIST/SEMATECH e-Handbook of Statistical Methods, 7.2.4.2 (printed limits from
# memory). Second: W. J. Conover, Practical Nonparametric Statistics, 1971, page 97. Others: standard table rows.
ROWS = [
    (4, 20, 0.90, 0.071354, 0.401029),
    (682, 925, 0.95, 0.7076683, 0.7654066),
    (3, 20, 0.95, 0.0321, 0.3789),
    (12, 30, 0.90, 0.2495, 0.5661),
    (42, 100, 0.95, 0.3220, 0.5229),
    (85, 120, 0.99, 0.5904, 0.8092),
    (0, 10, 0.95, 0.0, 0.3084971),
    (1, 10, 0.95, 0.0025286, 0.4450161),
    (10, 10, 0.95, 0.6915029, 1.0),
]


@pytest.mark.parametrize(("errors", "bits", "coverage", "low", "high"), ROWS)
def test_interval_is_in_the_handbook(errors, bits, coverage, low, high) -> None:
    found = exact_interval(errors, bits, coverage)
    digits = 5e-5 if low in (0.0321, 0.2495, 0.3220, 0.5904) else 1.1e-6  # printed digits
    assert found == pytest.approx((low, high), abs=digits)


@pytest.mark.parametrize(
    ("errors", "bits"), [(1, 10), (7, 100), (93, 100), (1500, 400_000), (10, 1_000_000), (100, 1_000_000)]
)
def test_two_libraries_agree(errors: int, bits: int) -> None:
    found = exact_interval(errors, bits)
    from_scipy = binomtest(errors, bits).proportion_ci(0.95, "exact")
    assert found == pytest.approx((from_scipy.low, from_scipy.high), rel=1e-5)  # its root finder stops at 3e-13
    assert found == pytest.approx(proportion_confint(errors, bits, 0.05, "beta"), rel=1e-9)


@pytest.mark.parametrize(
    ("errors", "bits"), [(1000, 10**10), (1000, 10**12), (1, 10**13), (20, 10**9), (10**5, 10**11)]
)
def test_tiny_ratios_follow_chi_square(errors: int, bits: int) -> None:
    """F. Garwood, Biometrika 28, 437, 1936: there the binomial is a Poisson to one part in the ratio itself."""
    low, high = exact_interval(errors, bits)
    assert low * bits == pytest.approx(
        chi2.ppf(0.025, 2 * errors) / 2, rel=2 * math.sqrt(errors) * errors / bits + 1e-9
    )
    assert high * bits == pytest.approx(
        chi2.ppf(0.975, 2 * errors + 2) / 2, rel=2 * math.sqrt(errors) * errors / bits + 1e-9
    )


@settings(max_examples=150, deadline=None, derandomize=True)
@given(st.integers(1, 10**9), st.floats(0.0, 1.0), st.sampled_from([0.68, 0.9, 0.95, 0.99]))
def test_limits_have_the_tails_they_claim(bits: int, share: float, coverage: float) -> None:
    errors = min(bits, int(share**4 * bits))
    low, high = exact_interval(errors, bits, coverage)
    assert 0.0 <= low <= errors / bits <= high <= 1.0
    tail = (1 - coverage) / 2
    # 1e-6 of the tail: what evaluating the limit in floating point leaves at 1e9 bits
    if errors > 0:
        assert binom.sf(errors - 1, bits, low) == pytest.approx(tail, rel=1e-6)
    if errors < bits:
        assert binom.cdf(errors, bits, high) == pytest.approx(tail, rel=1e-6)


# One-sided 95 %, errors times limit, zero errors: 2.9957; the "3 over n" of the trade.
@pytest.mark.parametrize(("confidence", "product"), [(0.90, 2.302585), (0.95, 2.995732), (0.99, 4.605170)])
def test_zero_errors_give_three_over_n(confidence: float, product: float) -> None:
    assert upper_limit(10**9, confidence) * 10**9 == pytest.approx(product, rel=1e-6)
    assert poisson.pmf(0, upper_limit(10**9, confidence) * 10**9) == pytest.approx(1 - confidence, rel=1e-6)
    assert (1 - upper_limit(100, confidence)) ** 100 == pytest.approx(1 - confidence)


@pytest.mark.parametrize(("errors", "bits"), [(1, 0), (-1, 10), (11, 10)])
def test_impossible_counts_are_refused(errors: int, bits: int) -> None:
    with pytest.raises(ValueError, match="cannot be"):
        exact_interval(errors, bits)


def test_impossible_coverage_is_refused() -> None:
    with pytest.raises(ValueError, match="coverage"):
        exact_interval(1, 10, 95.0)
