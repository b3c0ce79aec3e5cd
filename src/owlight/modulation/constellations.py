"""Square constellations with Gray labels: label = (Gray code of I << half) | Gray code of Q, most significant first."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

_BITS = {"BPSK": 1, "QPSK": 2, "16QAM": 4, "64QAM": 6, "256QAM": 8}


def levels(bits: int) -> npt.NDArray[np.float64]:
    """Amplitudes of one quadrature by Gray code: element g is the level whose Gray code is g, from -(L-1) to L-1.

    >>> levels(1).tolist(), levels(2).tolist()
    ([-1.0, 1.0], [-3.0, -1.0, 3.0, 1.0])
    """
    steps = np.arange(2**bits)
    found = np.empty(2**bits)
    found[steps ^ (steps >> 1)] = 2.0 * steps - (2**bits - 1)
    return found


def constellation(modulation: str) -> npt.NDArray[np.complex128]:
    """Points of unit average power, indexed by label; ValueError for an unknown format.

    >>> constellation("QPSK")[0b10].round(4)
    np.complex128(0.7071-0.7071j)
    """
    if modulation not in _BITS:
        raise ValueError(f"There is no format {modulation!r}; the known ones are {', '.join(_BITS)}")
    bits = _BITS[modulation]
    if bits == 1:
        return levels(1).astype(np.complex128)
    axis = levels(bits // 2)
    points = np.asarray((axis[:, None] + 1j * axis[None, :]).reshape(-1))
    return np.asarray(points / np.sqrt(np.mean(np.abs(points) ** 2)))


def bits_of_labels(labels: npt.NDArray[np.integer], bits: int) -> npt.NDArray[np.uint8]:
    """Bits of each label, most significant first: shape (..., bits), uint8.

    >>> bits_of_labels(np.array([0b01, 0b10]), 2).tolist()
    [[0, 1], [1, 0]]
    """
    return ((np.asarray(labels)[..., None] >> np.arange(bits - 1, -1, -1)) & 1).astype(np.uint8)
