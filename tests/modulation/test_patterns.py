"""Patterns against the vectors of ITU-T O.150 (from memory, made by two independent generators) and two libraries."""

from __future__ import annotations

import itertools

import galois
import numpy as np
import pytest
from scipy.signal import max_len_seq

from owlight.modulation import pattern, spread_offsets

VECTORS = {
    7: "111111100000010000011000010100011110010001011001110101001111101000011100010010011011010110111101100011010010111"
    "0111001100101010",
    9: "1111111110000011110111110001011100110010000010010100111011010001",
    11: "1111111111100000000011000000011110000011001100011111111011000000",
    15: "1111111111111110000000000000010000000000000110000000000001010000",
    20: "1111111111111111111100000000000000000111000000000000001111110000",
    23: "1111111111111111111111100000000000000000011111000000000000011111",
    31: "1111111111111111111111111111111000000000000000000000000000011100",
}
TAPS = {7: 6, 9: 5, 11: 9, 15: 14, 20: 17, 23: 18}


@pytest.mark.parametrize("order", VECTORS)
def test_pattern_begins_as_recommended(order: int) -> None:
    expected = VECTORS[order]
    assert "".join(map(str, pattern(order, len(expected)))) == expected


@pytest.mark.parametrize("order", [7, 9, 11, 15, 20, 23])
def test_scipy_makes_the_same_period(order: int) -> None:
    # max_len_seq counts its taps from the other end of the register
    theirs = max_len_seq(order, state=np.ones(order), taps=[order - TAPS[order]])[0]
    assert np.array_equal(pattern(order), theirs)


@pytest.mark.parametrize("order", [7, 9, 11, 15])
def test_galois_register_makes_the_same(order: int) -> None:
    register = galois.FLFSR(galois.Poly.Degrees([order, TAPS[order], 0]), state=[1] * order)
    assert np.array_equal(pattern(order), np.array(register.step(2**order - 1), dtype=np.uint8))


@pytest.mark.parametrize("order", [7, 9, 10, 11, 15])
def test_autocorrelation_is_two_valued(order: int) -> None:
    signs = 1.0 - 2.0 * pattern(order)
    spectrum = np.fft.fft(signs)
    correlation = np.fft.ifft(np.abs(spectrum) ** 2).real
    assert correlation[0] == pytest.approx(2**order - 1)
    assert np.allclose(correlation[1:], -1.0, atol=1e-6)  # rounding of the transform


def test_pattern_of_unknown_order_is_refused() -> None:
    with pytest.raises(ValueError, match="the known ones are 7, 9"):
        pattern(8)


@pytest.mark.parametrize(("order", "apart"), [(15, 1095), (11, 60), (20, 20_000)])
def test_spread_offsets_keep_lags_apart(order: int, apart: int) -> None:
    period = 2**order - 1
    offsets = spread_offsets(order, 4)
    lags = sorted((b - a) % period for a, b in itertools.permutations(offsets, 2))
    assert min(min(lag, period - lag) for lag in lags) >= apart
    assert min(b - a for a, b in itertools.pairwise(lags)) >= apart
