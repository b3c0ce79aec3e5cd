"""What is wrong between I and Q, measured from the image it leaves: the signal against its own symbols, mirrored.

With Q late by tau, too large by a factor 1 + g, and its axis turned by e beyond 90 degrees, a received polarisation is
Z(f) + r(f) conj Z(-f), and to first order r(f) = -g/2 - j e/2 + j pi f tau. Noise has no part in it, neither that of a
lane alone nor that which two lanes share, and both bias a correlation of the lanes themselves.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import scipy.fft

Complex = npt.NDArray[np.complex64]
_SEGMENT = 512
_INSIDE = 0.42
"""Frequencies used, in symbol rates: the edges of the band hold little signal."""


@dataclass(frozen=True)
class Imbalance:
    """Of Q against I in one polarisation, each beside its standard uncertainty."""

    skew_s: float
    skew_u_s: float
    quadrature_error_deg: float
    quadrature_error_u_deg: float
    gain_i_over_q_db: float
    gain_u_db: float


def imbalances(x: Complex, symbols: Complex, moved: tuple[float, float], symbol_rate_bd: float) -> list[Imbalance]:
    """One a received polarisation: x (polarisations, samples) at two samples a symbol, symbol k at sample 2 k.

    `symbols` (outputs, n) are turned as the carrier turns them in x. The image lies mirrored about the frequency that
    was zero in the lanes: x was turned back from there, by `moved` radians at its first sample and a sample.

    >>> rng = np.random.default_rng(1)
    >>> sent = (rng.choice([-1, 1], 65536) + 1j * rng.choice([-1, 1], 65536)) / np.sqrt(2)
    >>> turned = sent * np.exp(0.01j * np.arange(65536))
    >>> wave = np.repeat(turned, 2)
    >>> q = np.cos(np.radians(93)) * wave.real + np.sin(np.radians(93)) * wave.imag
    >>> x = (wave.real + 1j * q).astype(np.complex64)[None, :]
    >>> found = imbalances(x, turned.astype(np.complex64)[None, :], (0.0, 0.0), 1.0)
    >>> round(found[0].quadrature_error_deg, 1)
    3.0
    """
    count = min(symbols.shape[1], x.shape[1] // 2) // (_SEGMENT // 2) * (_SEGMENT // 2)
    back = np.exp(1j * (moved[0] + moved[1] * np.arange(2 * count))).astype(np.complex64)
    spread = np.zeros((len(symbols), 2 * count), dtype=np.complex64)
    spread[:, ::2] = symbols[:, :count]
    taken, sent = (_segments(part * back) for part in (x[:, : 2 * count], spread))
    minus = -np.arange(_SEGMENT)
    causes = np.concatenate([sent, sent[:, :, minus].conj()]).transpose(2, 0, 1)
    # all at once: what the straight path explains is then no noise to the image
    gram = (causes @ causes.conj().transpose(0, 2, 1)).astype(np.complex128)
    gram += 1e-6 * np.trace(gram, axis1=1, axis2=2).real[:, None, None] * np.eye(gram.shape[1])
    cross = (causes @ taken.conj().transpose(2, 1, 0)).astype(np.complex128)
    paths = np.linalg.solve(gram, cross).conj()
    straight, image = paths[:, : len(sent)], paths[:, len(sent) :]
    mirror = straight[minus].conj()
    ratio = ((image * mirror.conj()).sum(axis=1) / np.maximum((np.abs(mirror) ** 2).sum(axis=1), 1e-30)).T
    f = scipy.fft.fftfreq(_SEGMENT, 0.5 / symbol_rate_bd)
    # where the band and its mirror image overlap, whatever the carrier's offset
    inside = np.abs(f) < max(_INSIDE - abs(moved[1]) / np.pi, 0.05) * symbol_rate_bd
    return [_fitted(f[inside], r[inside].astype(np.complex128)) for r in ratio]


def _segments(part: Complex) -> Complex:
    return np.asarray(scipy.fft.fft(part.reshape(len(part), -1, _SEGMENT), axis=2))


def _fitted(f: npt.NDArray[np.float64], r: npt.NDArray[np.complex128]) -> Imbalance:
    """Straight line through the imaginary part, mean of the real part; uncertainties from what is left over."""
    square = float(np.sum(f**2))
    slope, offset, real = float(np.sum(f * r.imag) / square), float(r.imag.mean()), float(r.real.mean())
    scatter = float(np.std(r.imag - slope * f))
    decibels = 20 / np.log(10)
    return Imbalance(
        skew_s=slope / np.pi,
        skew_u_s=scatter / (np.pi * square**0.5),
        quadrature_error_deg=float(np.degrees(-2 * offset)),
        quadrature_error_u_deg=float(np.degrees(2 * scatter / np.sqrt(len(f)))),
        gain_i_over_q_db=float(2 * real * decibels),
        gain_u_db=float(2 * scatter / np.sqrt(len(f)) * decibels),
    )
