"""From a pattern to the modulated field at any instants: symbols, pulse shape, and exact resampling."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
import numpy.typing as npt
from scipy.fft import fft, ifft, next_fast_len

from owlight.modulation import constellation, pattern, root_raised_cosine_spectrum
from owlight.simulation.optics.keys import generator
from owlight.simulation.optics.power import linear
from owlight.simulation.optics.settings import LightSettings

Complex = npt.NDArray[np.complex128]
Bits = npt.NDArray[np.uint8]

GUARD_SYMBOLS = 256
"""Symbols before the first instant and after the last; the block's ends never reach the record."""
_LONGEST_WHOLE_ORDER = 23
_PART_BITS = 1 << 24


def start_of(s: LightSettings, key: int) -> int:
    """Where in its period the pattern stands at the first symbol; a capture never begins with the pattern's start."""
    whole = s.pattern_order <= _LONGEST_WHOLE_ORDER
    period = 2**s.pattern_order - 1 if whole else _PART_BITS // 4
    return int(generator(key, "pattern start").integers(1, period))


def fraction_of(key: int) -> float:
    """How far into a symbol the trigger falls."""
    return float(generator(key, "trigger").random())


def symbols(s: LightSettings, start: int, count: int) -> Complex:
    """Symbols of both polarisations, shape (2, count), unit power in each that is modulated.

    A tributary takes the bits of its level one after the other from its own place in the one pattern.
    """
    points = constellation(s.modulation)
    bits = int(np.log2(points.size))
    found = np.zeros((2, count), dtype=np.complex128)
    for polarisation in range(s.polarisations):
        labels = np.zeros(count, dtype=np.intp)
        for lane, width in enumerate(_widths(bits)):
            part = _bits(s.pattern_order, start + s.offsets[2 * polarisation + lane], count * width)
            for bit in range(width):
                labels = (labels << 1) | part[bit::width]
        found[polarisation] = points[labels]
    return found


def _widths(bits: int) -> tuple[int, ...]:
    """Bits of I and of Q in a label."""
    return (1,) if bits == 1 else (bits // 2, bits // 2)


def _bits(order: int, start: int, count: int) -> Bits:
    if order > _LONGEST_WHOLE_ORDER:
        if start + count > _PART_BITS:
            raise ValueError(f"Offsets into a pattern of order {order} reach bit {start + count} of {_PART_BITS}")
        return _pattern(order, _PART_BITS)[start : start + count]
    whole = _pattern(order, None)
    return np.asarray(np.take(whole, np.arange(start, start + count), mode="wrap"))


@lru_cache(maxsize=2)
def _pattern(order: int, length: int | None) -> Bits:
    return pattern(order, length)


def block_length(instants: int, symbols_per_instant: float) -> int:
    """Symbols of a block that holds all instants and a guard on both sides."""
    return int(next_fast_len(int(np.ceil(instants * symbols_per_instant)) + 2 * GUARD_SYMBOLS))


def shaped(block: Complex, rolloff: float, first: float, step: float, instants: int) -> Complex:
    """The root-raised-cosine waveform of a block of symbols at `first + n step`, in symbol durations from its start.

    The waveform is band-limited, so its Fourier series gives it exactly at any instant; the sum over the series at
    evenly spaced instants of any spacing is a chirp transform. L. Rabiner, R. Schafer, C. Rader, "The chirp
    z-transform algorithm", IEEE Transactions on Audio and Electroacoustics 17(2), 86, 1969.
    """
    count = block.size
    highest = min(int(np.floor((1.0 + rolloff) / 2.0 * count)), count - 1)
    k = np.arange(-highest, highest + 1)
    spectrum = fft(block)[k % count] * (root_raised_cosine_spectrum(k / count, rolloff) / count)
    spectrum *= np.exp(2j * np.pi * (first / count) * k)
    before, after, transform = _chirps(highest, step / count, instants)
    length = transform.size
    padded = np.zeros(length, dtype=np.complex128)
    padded[: k.size] = spectrum * before
    # element 0 stands for k = -highest, so the sum for instant n is found at n + 2 highest
    convolved = ifft(fft(padded, overwrite_x=True) * transform, overwrite_x=True)
    return np.asarray(convolved[2 * highest : 2 * highest + instants] * after)


@lru_cache(maxsize=4)
def _chirps(highest: int, cycles: float, instants: int) -> tuple[Complex, Complex, Complex]:
    """k n = (k^2 + n^2 - (n - k)^2) / 2 turns the sum over k into a convolution with a chirp."""
    k = np.arange(-highest, highest + 1, dtype=np.float64)
    n = np.arange(instants, dtype=np.float64)
    lags = np.arange(-highest, instants + highest, dtype=np.float64)
    chirp = np.exp(-1j * np.pi * cycles * lags**2)
    # what wraps around at this length lands below the part that is used
    length = next_fast_len(lags.size)
    kernel = np.zeros(length, dtype=np.complex128)
    kernel[: lags.size] = chirp
    return np.exp(1j * np.pi * cycles * k**2), np.exp(1j * np.pi * cycles * n**2), fft(kernel)


def with_noise(block: Complex, ceiling_db: float | None, rng: np.random.Generator) -> Complex:
    """Symbols with the transmitter's own noise, at the same total power."""
    if ceiling_db is None:
        return block
    share = linear(-ceiling_db)
    noise = rng.standard_normal((2, block.size)) * np.sqrt(share / 2.0)
    return np.asarray((block + noise[0] + 1j * noise[1]) / np.sqrt(1.0 + share))
