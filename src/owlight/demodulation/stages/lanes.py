"""What is done to real lanes: scaling, deskew, orthonormalisation. All estimates come from spectra of whole blocks.

Polarisations stand on the first axis; a polarisation is I + jQ of its two lanes.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt
import scipy.fft

from owlight.vocabulary.captures import Lane

Complex = npt.NDArray[np.complex64]
Real = npt.NDArray[np.float64]
Figures = dict[str, float]


def scale(lanes: Sequence[Lane], inverted: Sequence[bool], remove_mean: bool = True) -> tuple[Complex, Figures]:
    """Codes to volts, lanes to polarisations: (polarisations, samples) complex64 from lanes in the order I, Q, I, Q.

    An inverted lane changes its sign. Figures of each lane: mean and rms in volts (or codes, as their names say), and
    clipped fraction.

    >>> lanes = [Lane(name, np.array([1, 3], np.int8), 0.5, 0.0, 0.0, "") for name in "IQ"]
    >>> scale(lanes, [False, True])[0].tolist()
    [[(-0.5+0.5j), (0.5-0.5j)]]
    """
    polarisations = np.empty((len(lanes) // 2, len(lanes[0].codes)), dtype=np.complex64)
    figures: Figures = {}
    for number, (lane, turned) in enumerate(zip(lanes, inverted, strict=True)):
        volts = lane.codes.astype(np.float32) * np.float32(-lane.volts_per_code if turned else lane.volts_per_code)
        mean = float(volts.mean(dtype=np.float64))
        if remove_mean:
            volts -= np.float32(mean)
        half = polarisations[number // 2]
        (half.imag if number % 2 else half.real)[:] = volts
        mean_v = lane.offset_v + (-mean if turned else mean)
        key = lane.name.lower()
        unit = "v" if lane.in_volts else "codes"
        figures[f"mean_{key}_{unit}"] = mean_v
        figures[f"rms_{key}_{unit}"] = float(np.sqrt(np.vdot(volts, volts) / len(volts)))
        figures[f"clipped_fraction_{key}"] = lane.clipped_fraction
    return polarisations, figures


def block_spectra(z: Complex, length: int) -> Complex:
    """Transforms of consecutive blocks without overlap: (polarisations, blocks, length) complex64.

    >>> block_spectra(np.ones((1, 8), np.complex64), 4)[0, :, 0].tolist()
    [(4+0j), (4+0j)]
    """
    blocks = z.shape[1] // length
    return np.asarray(scipy.fft.fft(z[:, : blocks * length].reshape(len(z), blocks, length), axis=2))


def _lane_spectra(spectra: Complex, bins: npt.NDArray[np.intp]) -> tuple[Complex, Complex]:
    """Spectra of I and of Q at the given bins, from those of I + jQ."""
    straight, mirrored = spectra[..., bins], np.conj(spectra[..., -bins % spectra.shape[-1]])
    return (straight + mirrored) / 2, (straight - mirrored) / 2j


def deskew(skews_s: npt.ArrayLike, frequencies_hz: npt.ArrayLike) -> npt.NDArray[np.complex128]:
    """What a lane's spectrum is multiplied with, so that a lane late by `skews_s` is on time: (lanes, frequencies).

    >>> deskew([2e-12], [125e9]).round(6).tolist()   # a quarter turn ahead
    [[1j]]
    """
    turns = np.multiply.outer(np.asarray(skews_s, dtype=np.float64), np.asarray(frequencies_hz, dtype=np.float64))
    return np.asarray(np.exp(2j * np.pi * turns))


def orthonormalise(
    spectra: Complex, skews_s: npt.ArrayLike, sample_rate_hz: float, highest_hz: float
) -> tuple[Real, Figures]:
    """Gram-Schmidt after deskew, from the spectra below `highest_hz`: a real 2 x 2 matrix a polarisation.

    It makes I and Q uncorrelated and of power 1/2 each. Deskew comes first: with an offset carrier, skew looks like a
    quadrature error.

    I. Fatadin, S. J. Savory, D. Ives, IEEE Photonics Technology Letters 20(20), 1733, 2008.
    Figures: quadrature error (the angle between I and Q beyond 90 degrees) and gain of I over Q, as corrected; noise
    that the lanes do not share dilutes the first.

    >>> rng = np.random.default_rng(1)
    >>> i, ideal = rng.standard_normal((2, 65536))
    >>> z = (i + 1j * (np.cos(np.radians(93)) * i + np.sin(np.radians(93)) * ideal)).astype(np.complex64)[None, :]
    >>> _, figures = orthonormalise(block_spectra(z, 1024), [0.0, 0.0], 1.0, 0.5)
    >>> round(figures["applied_quadrature_x_deg"])
    3
    """
    length = spectra.shape[-1]
    bins = np.arange(1, max(2, min(length // 2, int(highest_hz / sample_rate_hz * length))))
    i, q = _lane_spectra(spectra, bins)
    skews = np.asarray(skews_s, dtype=np.float64).reshape(-1, 2)
    turn = deskew(skews[:, 0] - skews[:, 1], bins * (sample_rate_hz / length))
    weight = 2.0 / (length**2 * spectra.shape[1])
    power_i, power_q = ((np.abs(lane) ** 2).sum(axis=(1, 2), dtype=np.float64) * weight for lane in (i, q))
    cross = np.einsum("pbf,pf->p", i * np.conj(q), turn).real * weight
    matrices = np.zeros((len(spectra), 2, 2))
    figures: Figures = {}
    for p, key in enumerate("xy"[: len(spectra)]):
        if power_i[p] <= 0.0 or power_q[p] <= 0.0:
            raise ValueError("a lane without signal cannot be orthonormalised")
        correlation = float(np.clip(cross[p] / np.sqrt(power_i[p] * power_q[p]), -0.99, 0.99))
        across = 1.0 / np.sqrt(1.0 - correlation**2)
        gain_i, gain_q = np.sqrt(0.5 / power_i[p]), np.sqrt(0.5 / power_q[p])
        matrices[p] = [[gain_i, 0.0], [-correlation * across * gain_i, across * gain_q]]
        figures[f"applied_quadrature_{key}_deg"] = float(-np.degrees(np.arcsin(correlation)))
        figures[f"applied_gain_{key}_db"] = float(10 * np.log10(power_i[p] / power_q[p]))
    return matrices, figures
