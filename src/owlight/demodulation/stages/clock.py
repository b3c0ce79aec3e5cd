"""Where the carrier and the symbols are, from the correlation of the two edges of the band.

A linear signal of symbol rate R repeats its spectrum every R: bins R apart at the two edges belong together, and the
phase between them is the symbols' delay. Of two polarisations the 2 x 2 matrix of correlations is used whole; its
determinant does not change with rotation or group delay difference, where a plain sum of two tones can vanish. What is
in it twice is known modulo half a symbol, which an equaliser at two samples a symbol does not mind.
D. N. Godard, IEEE Transactions on Communications 26(5), 517, 1978 (band-edge timing).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import scipy.fft

Complex = npt.NDArray[np.complex64]
_REFINEMENT = 32


@dataclass(frozen=True)
class ClockEstimate:
    """Symbol k lies at sample `first_sample + k * samples_a_symbol`.

    `clock_offset_ppm`: by how much the sample clock runs fast against the symbols. `turn_a_block`: phase in radians by
    which the symbol clock moves on from block to block. `quality`: the coherent share of the clock's power, 1 at best.
    """

    first_sample: float
    samples_a_symbol: float
    clock_offset_ppm: float
    turn_a_block: float
    quality: float


def estimation_length(samples_a_symbol: float) -> int:
    """A block length near 5000 samples in which the symbol rate falls on a bin as nearly as can be.

    >>> estimation_length(2.5) / 2.5 % 1
    0.0
    """
    lengths = [n for n in range(4000, 6001) if scipy.fft.next_fast_len(n) == n]
    return min(
        lengths, key=lambda n: (round(abs(n / samples_a_symbol - round(n / samples_a_symbol)), 6), abs(n - 5000))
    )


def band_edges(spectra: Complex, apart: int, centre_bins: int, half_width: int) -> npt.NDArray[np.complex128]:
    """Correlation of bins `apart` bins apart around a carrier at `centre_bins`: (blocks, polarisations, polarisations).

    spectra: (polarisations, blocks, length).

    >>> spectra = np.zeros((1, 1, 16), np.complex64)
    >>> spectra[0, 0, 4], spectra[0, 0, -4] = 2j, 3           # the two edges of a band of 8 bins
    >>> band_edges(spectra, 8, 0, 1).tolist()
    [[[6j]]]
    """
    length = spectra.shape[-1]
    upper = centre_bins + apart - apart // 2 + np.arange(-half_width, half_width + 1)
    above, below = spectra[..., upper % length], spectra[..., (upper - apart) % length]
    return np.asarray(np.matmul(above.transpose(1, 0, 2), np.conj(below.transpose(1, 2, 0))).astype(np.complex128))


def coarse_frequency_offset(spectra: Complex, apart: int, half_width: int, reach: int) -> tuple[int, float]:
    """The carrier in bins, within `reach` either side, and how far its edge correlation stands above the rest (ratio).

    spectra: (polarisations, blocks, length); `apart` is the symbol rate and `half_width` half the roll-off in bins.

    >>> rng = np.random.default_rng(1)
    >>> one = rng.standard_normal((1, 8, 100)) + 1j * rng.standard_normal((1, 8, 100))
    >>> edges = np.abs(np.arange(400) - 200) <= 60            # 100 bins apart, 20 shared
    >>> repeated = np.tile(one, 4) * edges
    >>> coarse_frequency_offset(np.roll(np.fft.ifftshift(repeated, axes=2), 7, axis=2), 100, 10, 50)[0]
    7
    """
    length, polarisations = spectra.shape[-1], len(spectra)
    upper = apart - apart // 2 + np.arange(-reach - half_width, reach + half_width + 1)
    above, below = spectra[..., upper % length], np.conj(spectra[..., (upper - apart) % length])
    window = 2 * half_width + 1
    power = np.zeros(2 * reach + 1)
    for p in range(polarisations):
        for q in range(polarisations):
            sums = np.cumsum(above[p] * below[q], axis=1, dtype=np.complex128)
            sums = np.concatenate([np.zeros((len(sums), 1)), sums], axis=1)
            power += (np.abs(sums[:, window:] - sums[:, :-window]) ** 2).sum(axis=0)
    best = int(np.argmax(power))
    typical = float(np.median(power))
    return best - reach, float(power[best] / typical) if typical > 0 else 1.0


def recover_clock(
    edges: npt.NDArray[np.complex128], length: int, samples_a_symbol: float, largest_offset_ppm: float
) -> ClockEstimate:
    """Symbol rate and phase against the sample clock from one edge correlation a block of `length` samples.

    >>> turns = 400 / 2.5 * (1 - 10e-6) * np.arange(50)       # 10 ppm more samples a symbol than thought
    >>> edges = np.exp(2j * np.pi * turns)[:, None, None]
    >>> round(recover_clock(edges, 400, 2.5, 150.0).clock_offset_ppm, 1)
    10.0
    """
    blocks, polarisations = len(edges), edges.shape[1]
    symbols_a_block = length / samples_a_symbol
    steady = edges * np.exp(-2j * np.pi * (symbols_a_block % 1.0) * np.arange(blocks))[:, None, None]
    points = scipy.fft.next_fast_len(blocks * _REFINEMENT)
    power = (np.abs(scipy.fft.fft(steady, points, axis=0)) ** 2).sum(axis=(1, 2))
    reach = min(points // 2 - 2, int(np.ceil(largest_offset_ppm * 1e-6 * symbols_a_block * points)) + 1)
    allowed = np.arange(-reach, reach + 1)
    best = int(allowed[np.argmax(power[allowed])])
    before, at, after = power[best - 1], power[best], power[(best + 1) % points]
    curvature = before - 2 * at + after
    turns = (best + (0.5 * (before - after) / curvature if curvature else 0.0)) / points
    mean = (steady * np.exp(-2j * np.pi * turns * np.arange(blocks))[:, None, None]).mean(axis=0)
    # a block's phase is that of its own middle: half a block's drift lies between it and the block's start
    angle = np.angle(np.linalg.det(mean)) / polarisations - np.pi * turns
    offset = turns / symbols_a_block
    coherent = float((np.abs(mean) ** 2).sum() / max(float((np.abs(edges) ** 2).sum(axis=(1, 2)).mean()), 1e-300))
    return ClockEstimate(
        first_sample=float(-angle / (2 * np.pi) * samples_a_symbol),
        samples_a_symbol=samples_a_symbol / (1.0 + offset),
        clock_offset_ppm=float(1e6 * (1.0 / (1.0 + offset) - 1.0)),
        turn_a_block=float(2 * np.pi * (symbols_a_block % 1.0 + turns)),
        quality=coherent,
    )
