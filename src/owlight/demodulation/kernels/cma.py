"""The one loop that feeds its own result back at every symbol: blind adaptation of the equaliser."""

from __future__ import annotations

import numba
import numpy as np
import numpy.typing as npt

Complex = npt.NDArray[np.complex64]
Planes = npt.NDArray[np.float32]


@numba.njit("float64(float32[:,:,::1], float32[:,:,::1], float64, int64, int64)", cache=True, fastmath=True)
def adapt(x: Planes, taps: Planes, step: float, begin: int, symbols: int) -> float:
    """Adapt one output's `taps` in place from symbol `begin`; the mean squared error of the modulus.

    x: (2, polarisations, samples), real and imaginary planes at two samples a symbol; taps: (2, polarisations, length).
    """
    polarisations, length = taps.shape[1], taps.shape[2]
    total = 0.0
    for k in range(begin, begin + symbols):
        real, imag = np.float32(0.0), np.float32(0.0)
        for p in range(polarisations):
            a, b = x[0, p, 2 * k : 2 * k + length], x[1, p, 2 * k : 2 * k + length]
            c, d = taps[0, p], taps[1, p]
            for j in range(length):
                real += c[j] * a[j] - d[j] * b[j]
                imag += c[j] * b[j] + d[j] * a[j]
        error = np.float32(1.0) - (real * real + imag * imag)
        total += float(error * error)
        gain = np.float32(step) * error
        real, imag = gain * real, gain * imag
        for p in range(polarisations):
            a, b = x[0, p, 2 * k : 2 * k + length], x[1, p, 2 * k : 2 * k + length]
            c, d = taps[0, p], taps[1, p]
            for j in range(length):
                c[j] += real * a[j] + imag * b[j]
                d[j] += imag * a[j] - real * b[j]
    return total / symbols
