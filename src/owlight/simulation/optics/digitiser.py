"""From lane currents to codes: amplifier, bandwidth, skew, coupling, sampling, and a converter with its noise."""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np
import numpy.typing as npt
from scipy.fft import irfft, rfft

from owlight.simulation.optics.fields import Real
from owlight.simulation.world import Oscilloscope

Complex = npt.NDArray[np.complex128]

CODES = 256
_BESSEL_4 = (105.0, 105.0, 45.0, 10.0, 1.0)
"""Reverse Bessel polynomial of order 4, constant first. L. Weinberg, Network Analysis and Synthesis, chapter 11."""
_HALF_POWER_4 = 2.113917674904216
"""Where the magnitude of 105 / polynomial is the root of one half, in radians a unit of delay."""


def bessel_response(frequency_hz: Real, bandwidth_hz: float) -> Complex:
    """A fourth-order Bessel low-pass, half power at the bandwidth, its constant delay taken out."""
    w = _HALF_POWER_4 * frequency_hz / bandwidth_hz
    s = 1j * w
    found = _BESSEL_4[0] / np.polynomial.polynomial.polyval(s, np.asarray(_BESSEL_4))
    return np.asarray(found * np.exp(s))


@lru_cache(maxsize=16)
def _response(
    count: int, rate_hz: float, kept: int, bandwidth_hz: float | None, skew_s: float, ac_corner_hz: float | None
) -> Complex:
    """What a lane passes, at the first `kept` frequencies of a real transform of `count` values."""
    frequency_hz = np.asarray(np.arange(kept) * (rate_hz / count), dtype=np.float64)
    response = np.exp(-2j * np.pi * frequency_hz * skew_s)
    if bandwidth_hz is not None:
        response *= bessel_response(frequency_hz, bandwidth_hz)
    if ac_corner_hz is not None:
        # long settled when the record begins, so the periodic form has no transient to leave out
        response *= 1j * frequency_hz / (1j * frequency_hz + ac_corner_hz)
    return np.asarray(response)


def sampled(
    current_a: Real,
    rate_hz: float,
    every: int,
    bandwidth_hz: float | None,
    skew_s: float,
    ac_corner_hz: float | None,
) -> Real:
    """The filtered current at every `every`-th instant; nothing beyond half the sample rate gets to the converter."""
    count = current_a.size // every
    kept = count // 2 + 1
    spectrum = rfft(current_a, overwrite_x=True)[:kept]
    spectrum *= _response(current_a.size, rate_hz, kept, bandwidth_hz, skew_s, ac_corner_hz)
    spectrum *= 1.0 / every
    return np.asarray(irfft(spectrum, count, overwrite_x=True))


def quantised(volts: Real, range_v: float, scope: Oscilloscope, rng: np.random.Generator) -> npt.NDArray[np.int8]:
    """Signed 8-bit codes, volts = code * range / 256; what is beyond the range sticks to its end.

    Effective bits E mean a noise of (range / 2^E)^2 / 12 in all; rounding to 8 bits is a part of it.
    IEEE Std 1241, effective number of bits.
    """
    codes = volts * (CODES / range_v)
    if scope.effective_bits is not None:
        variance = (4.0 ** (8.0 - scope.effective_bits) - 1.0) / 12.0
        noise = rng.standard_normal(codes.size)
        noise *= math.sqrt(variance)
        codes += noise
    np.rint(codes, out=codes)
    np.clip(codes, -CODES // 2, CODES // 2 - 1, out=codes)
    return codes.astype(np.int8)
