"""Frequency offset and carrier phase of QPSK, blind, by the fourth power.

A. J. Viterbi, A. M. Viterbi, IEEE Transactions on Information Theory 29(4), 543, 1983.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
import scipy.fft

Complex = npt.NDArray[np.complex64]
Real = npt.NDArray[np.float64]


def decide(y: Complex) -> Complex:
    """The nearest QPSK point of unit power.

    >>> decide(np.array([0.1 - 3j], np.complex64)).round(3).tolist()
    [(0.7070000171661377-0.7070000171661377j)]
    """
    points = np.empty(y.shape, dtype=np.complex64)
    points.real = np.copysign(np.float32(np.sqrt(0.5)), y.real)
    points.imag = np.copysign(np.float32(np.sqrt(0.5)), y.imag)
    return points


def frequency_offset(y: Complex) -> tuple[float, float]:
    """Radians a symbol, within an eighth of a turn either way, and how far the line stands above the mean in dB.

    y is (polarisations, symbols); all polarisations have one carrier, so the spectra of their fourth powers are added.

    >>> rng = np.random.default_rng(1)
    >>> sent = (rng.choice([-1, 1], 4096) + 1j * rng.choice([-1, 1], 4096)) / np.sqrt(2)
    >>> turned = (sent * np.exp(0.03j * np.arange(4096)))[None, :].astype(np.complex64)
    >>> round(frequency_offset(turned)[0], 5)
    0.03
    """
    fourth = _fourth(y)
    length = 2 * scipy.fft.next_fast_len(y.shape[1])
    power = (np.abs(scipy.fft.fft(fourth, length, axis=1)) ** 2).sum(axis=0)
    best = int(np.argmax(power))
    before, at, after = (np.sqrt(float(power[(best + side) % length])) for side in (-1, 0, 1))
    curvature = before - 2 * at + after
    turns = (best + (0.5 * (before - after) / curvature if curvature else 0.0)) / length
    turns -= round(turns)
    line_db = 10 * np.log10(max(float(power[best]), 1e-30) / max(float(power.mean()), 1e-30))
    return float(2 * np.pi * turns / 4), float(line_db)


def carrier_phase(y: Complex, window_symbols: int) -> Real:
    """Carrier phase in radians of each symbol, unwrapped, up to quarter turns of the whole: (symbols,) float64.

    y is (polarisations, symbols), all with one carrier. Averaged over the `window_symbols` around each symbol without
    the symbol itself: a phase that its own noise had pulled would grade it too well.

    >>> rng = np.random.default_rng(1)
    >>> sent = (rng.choice([-1, 1], (1, 999)) + 1j * rng.choice([-1, 1], (1, 999))) / np.sqrt(2)
    >>> found = carrier_phase((sent * np.exp(0.2j)).astype(np.complex64), 64)
    >>> bool(np.allclose(found, 0.2, atol=1e-6))
    True
    """
    fourth = _fourth(y).sum(axis=0, dtype=np.complex128)
    half = max(1, window_symbols // 2)
    sums = np.concatenate([[0.0], np.cumsum(fourth)])
    at = np.arange(len(fourth))
    around = sums[np.minimum(at + half + 1, len(fourth))] - sums[np.maximum(at - half, 0)] - fourth
    return np.asarray(np.unwrap(np.angle(-around)) / 4.0)


def linewidth(phase: Real, window_symbols: int) -> float:
    """Combined linewidth in symbol rates: variance of phase steps over two distances, free of the estimate's own noise.

    var = 2 pi linewidth * distance + what both distances share. nan if the record is too short to tell.

    >>> rng = np.random.default_rng(1)
    >>> walk = np.cumsum(rng.standard_normal(400_000)) * np.sqrt(2 * np.pi * 3e-6)
    >>> round(linewidth(walk, 64) * 1e6)
    3
    """
    near, far = 2 * window_symbols, 6 * window_symbols
    if len(phase) < 8 * far:
        return float("nan")
    spread = [float(np.var(phase[distance:] - phase[:-distance])) for distance in (near, far)]
    return max(0.0, (spread[1] - spread[0]) / (2 * np.pi * (far - near)))


def _fourth(y: Complex) -> Complex:
    """The fourth power with its amplitude taken back to the second, which noise spoils less."""
    square = y * y
    return np.asarray(square * square / np.maximum(np.abs(square), np.float32(1e-20)))
