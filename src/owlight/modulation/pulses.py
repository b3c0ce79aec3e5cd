"""Root-raised-cosine pulse, in time and in frequency. Source: J. G. Proakis, Digital Communications, chapter 9."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

Real = npt.NDArray[np.float64]


def root_raised_cosine(time_symbols: npt.ArrayLike, rolloff: float) -> Real:
    """h(t), t in symbol durations, with unit energy: the integral of h squared over t is 1.

    >>> root_raised_cosine([0.0], 0.2).round(7).tolist()   # 1 - b + 4 b / pi
    [1.0546479]
    """
    t = np.atleast_1d(np.asarray(time_symbols, dtype=np.float64))
    if rolloff == 0.0:
        return np.asarray(np.sinc(t))
    with np.errstate(divide="ignore", invalid="ignore"):
        top = np.sin(np.pi * t * (1 - rolloff)) + 4 * rolloff * t * np.cos(np.pi * t * (1 + rolloff))
        found = top / (np.pi * t * (1 - (4 * rolloff * t) ** 2))
    found[t == 0.0] = 1 - rolloff + 4 * rolloff / np.pi
    pole = np.isclose(np.abs(t), 1 / (4 * rolloff), rtol=1e-9, atol=0.0)
    angle = np.pi / (4 * rolloff)
    found[pole] = rolloff / np.sqrt(2) * ((1 + 2 / np.pi) * np.sin(angle) + (1 - 2 / np.pi) * np.cos(angle))
    return found


def root_raised_cosine_spectrum(frequency_symbol_rates: npt.ArrayLike, rolloff: float) -> Real:
    """H(f), f in symbol rates: 1 in the pass band, the root of a raised cosine at the edge, 0 beyond (1 + rolloff)/2.

    >>> root_raised_cosine_spectrum([0.0, 0.5, 0.7], 0.2).round(4).tolist()
    [1.0, 0.7071, 0.0]
    """
    f = np.abs(np.atleast_1d(np.asarray(frequency_symbol_rates, dtype=np.float64)))
    if rolloff == 0.0:
        return np.where(f < 0.5, 1.0, np.where(f == 0.5, np.sqrt(0.5), 0.0))
    edge = np.clip((f - (1 - rolloff) / 2) / rolloff, 0.0, 1.0)
    return np.asarray(np.cos(np.pi / 2 * edge))
