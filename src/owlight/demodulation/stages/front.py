"""One spectral pass from lanes to two samples a symbol: deskew, orthonormalisation, matched filter, new rate, clock.

Each of the five is linear, so their product is applied once to each block (overlap-save). The ratio of the transforms'
lengths is the change of rate; what the ratio leaves over, and the clock's own offset, moves the blocks.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import numpy.typing as npt
import scipy.fft

from owlight.demodulation.stages.clock import ClockEstimate
from owlight.demodulation.stages.lanes import deskew
from owlight.modulation import root_raised_cosine_spectrum

Complex = npt.NDArray[np.complex64]
_NEAR_ENOUGH = 4e-6
_HARMLESS_DRIFT = 0.02
_LARGEST_PRIME = 101
"""A transform whose length has no larger factor is not much slower than the quickest."""
_BLOCKS_AT_ONCE = 32
"""So many blocks stay in the processor's cache; memory beside the result does not grow with the capture."""


@dataclass(frozen=True)
class Front:
    """All that the pass needs to know. `matrices`: one real 2 x 2 a polarisation; `skews_s`: one a lane."""

    sample_rate_hz: float
    symbol_rate_bd: float
    rolloff: float
    skews_s: tuple[float, ...]
    matrices: npt.NDArray[np.float64]
    centre_hz: float
    clock: ClockEstimate


@lru_cache(maxsize=64)
def block_lengths(samples_a_symbol: float, block: int) -> tuple[int, int]:
    """Lengths (in, out) of transforms whose ratio is half of `samples_a_symbol` as nearly as can be; out is even.

    >>> block_lengths(2.5, 4096), block_lengths(80 / 31.7898, 4096)
    ((5120, 4096), (4872, 3872))
    """
    return min(_pairs(samples_a_symbol / 2, block), key=lambda p: (p[2] // _NEAR_ENOUGH, abs(p[1] - block)))[:2]


def _pairs(ratio: float, block: int) -> Iterator[tuple[int, int, float]]:
    """Quick enough lengths around `block`, and how far their ratio is off."""
    for out in range(int(0.5 * block) & ~1, int(1.8 * block), 2):
        if scipy.fft.next_fast_len(out) == out:
            nearest = round(out * ratio)
            if _largest_prime(nearest) <= _LARGEST_PRIME:
                yield nearest, out, abs(nearest / (out * ratio) - 1.0)


def _largest_prime(number: int) -> int:
    largest, prime = 1, 2
    while prime * prime <= number:
        while number % prime == 0:
            number //= prime
            largest = prime
        prime += 1
    return max(largest, number)


def _first_position(front: Front, overlap: int) -> float:
    """Where in the lanes' samples the first sample of the result lies."""
    symbol = front.clock.samples_a_symbol
    return front.clock.first_sample + symbol * float(np.ceil(overlap / 4 - front.clock.first_sample / symbol))


def matched_filter(z: Complex, front: Front, block: int = 4096, overlap: int = 256) -> Complex:
    """(polarisations, 2 * symbols) complex64 at two samples a symbol, sample 2k on symbol k; average power near 1.

    z is (polarisations, samples). The carrier is moved to zero by `front.centre_hz`, rounded to a whole bin
    (`carrier_turns`). Symbols whose pulse is cut by the record's ends are left out.

    >>> tone = np.exp(2j * np.pi * 0.05 * np.arange(20_000)).astype(np.complex64)[None, :]      # 4 GHz at 80 GS/s
    >>> front = Front(80e9, 32e9, 0.1, (0.0, 0.0), np.eye(2)[None], 0.0, ClockEstimate(0.0, 2.5, 0.0, 0.0, 1.0))
    >>> found = matched_filter(tone, front)
    >>> found.shape[0], round(float(np.angle(found[0, 101] / found[0, 100])) / (2 * np.pi) * 64, 3)
    (1, 4.0)
    """
    length, out = block_lengths(front.clock.samples_a_symbol, block)
    margin = overlap // 2
    hop = out - 2 * margin
    step = front.clock.samples_a_symbol / 2
    first = _first_position(front, overlap)
    total = int((z.shape[1] - margin * step - first) / step) & ~1
    shift = round(front.centre_hz / front.sample_rate_hz * length)
    straight, mirrored, kept = _responses(front, length, out, shift)
    drift = np.asarray((step * out / length - 1.0) * (np.arange(out) - margin - hop / 2), dtype=np.float64)
    found = np.empty((len(z), max(total, 0)), dtype=np.complex64)
    padded = np.pad(z, ((0, 0), (length, 2 * length)))
    starts = np.arange(0, max(total, 0), hop)
    for group in range(0, len(starts), _BLOCKS_AT_ONCE):
        begin = starts[group : group + _BLOCKS_AT_ONCE]
        middle = first + (begin + hop / 2) * step  # the block is exact here and drifts to its ends
        at = np.floor(middle - (margin + hop / 2) * length / out).astype(np.int64)
        ahead = middle - at - (margin + hop / 2) * length / out
        spectra = scipy.fft.fft(padded[:, (at + length)[:, None] + np.arange(length)], axis=2, overwrite_x=True)
        bins = kept - shift
        turn = ahead[:, None] * bins / length - (shift * at / length % 1.0)[:, None]
        product = spectra[..., kept % length] * straight[:, None, :]
        product += np.conj(spectra[..., -kept % length]) * mirrored[:, None, :]
        product *= np.exp(2j * np.pi * turn).astype(np.complex64)
        blocks = _in_time(product, bins, drift)[..., margin : margin + hop]
        flat = blocks.reshape(len(z), -1)
        stop = min(begin[0] + flat.shape[1], total)
        found[:, begin[0] : stop] = flat[:, : stop - begin[0]]
    level = np.sqrt(np.mean(np.abs(found[:, ::7]) ** 2, axis=1, keepdims=True)) if total > 0 else 1.0
    return np.asarray(found / np.where(level > 0, level, 1.0), dtype=np.complex64)


def _in_time(product: Complex, bins: npt.NDArray[np.int64], drift: npt.NDArray[np.float64]) -> Complex:
    """Blocks in time; each sample is moved by its `drift`, in samples, along the slope where that is worth it."""
    if np.abs(drift).max() < _HARMLESS_DRIFT:
        return np.asarray(scipy.fft.ifft(product, axis=2, overwrite_x=True))
    slope = scipy.fft.ifft(product * (2j * np.pi / len(drift) * bins).astype(np.complex64), axis=2, overwrite_x=True)
    return np.asarray(scipy.fft.ifft(product, axis=2, overwrite_x=True) + slope * drift.astype(np.float32))


def carrier_turns(front: Front, block: int, overlap: int) -> tuple[float, float]:
    """How far the pass turned the carrier back: radians at the first sample of the result, and a sample.

    >>> clock = ClockEstimate(0.0, 2.5, 0.0, 0.0, 1.0)
    >>> front = Front(80e9, 32e9, 0.1, (0.0, 0.0), np.eye(2)[None], 200e6, clock)
    >>> round(carrier_turns(front, 4096, 256)[1] / (2 * np.pi) * 64e9)
    203125000
    """
    length, _ = block_lengths(front.clock.samples_a_symbol, block)
    turn = 2 * np.pi * round(front.centre_hz / front.sample_rate_hz * length) / length
    return turn * _first_position(front, overlap), turn * front.clock.samples_a_symbol / 2


def _responses(front: Front, length: int, out: int, shift: int) -> tuple[Complex, Complex, npt.NDArray[np.int64]]:
    """What the spectrum and its mirror are multiplied with, and which bins are kept, in the order of a transform."""
    baseband = np.fft.fftfreq(out, 1.0 / out).astype(np.int64)
    kept = baseband + shift
    frequencies_hz = kept * (front.sample_rate_hz / length)
    baseband_hz = baseband * (front.sample_rate_hz / length)
    shape = root_raised_cosine_spectrum(baseband_hz / front.symbol_rate_bd, front.rolloff) * (out / length)
    turns = deskew(front.skews_s, frequencies_hz).reshape(len(front.matrices), 2, out)
    i = (front.matrices[:, 0, 0] + 1j * front.matrices[:, 1, 0])[:, None] * turns[:, 0]
    q = (front.matrices[:, 0, 1] + 1j * front.matrices[:, 1, 1])[:, None] * turns[:, 1]
    # I = (Z + Z~) / 2 and Q = (Z - Z~) / 2j, with Z~(f) = conj Z(-f)
    straight, mirrored = (i - 1j * q) / 2 * shape, (i + 1j * q) / 2 * shape
    return straight.astype(np.complex64), mirrored.astype(np.complex64), kept
