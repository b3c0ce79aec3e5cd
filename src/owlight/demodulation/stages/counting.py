"""Errors of aligned tributaries, and what the symbols say of their own quality.

Everything is held against the pattern that was sent (data-aided), on symbols that trained nothing.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from owlight.demodulation.stages.synchronisation import Match, Reference

Complex = npt.NDArray[np.complex64]
Signs = npt.NDArray[np.int8]
_SLIPPED = 0.2
"""A block with more errors than this is tried at the other three rotations."""


@dataclass(frozen=True)
class Counts:
    """Of one polarisation: bits and errors of its I and Q as received, quality, and slips of the carrier."""

    bits: int
    errors: tuple[int, int]
    snr_db: float
    gmi_bits: float
    slips: int
    errors_without_slips: int


def _expected_signs(match: Match, reference: Reference, at: npt.NDArray[np.intp]) -> Signs:
    """What a matched tributary should show at symbols `at` of its output, -1 or 1."""
    one = reference.patterns[reference.source[match.expected]]
    return np.asarray(one[(match.start + at) % len(one)] * np.int8(match.sign))


def count(y: Complex, pair: Sequence[Match], reference: Reference, at: npt.NDArray[np.intp], block: int) -> Counts:
    """Count one output, y (symbols,) at indices `at`. The headline count leaves slips in; blocks of `block` find them.

    >>> reference = Reference(np.array([[1, -1, -1], [1, 1, -1]], np.int8), (0, 1), (0, 0), True, 3)
    >>> pair = (Match(0, 0, 1, 1.0, 0.0, 0), Match(1, 0, 1, 1.0, 0.0, 0))
    >>> y = np.array([1 + 1j, -1 + 1j, 1 - 1j] * 4, np.complex64)       # the third symbol's I is wrong, four times
    >>> found = count(y, pair, reference, np.arange(12), 1024)
    >>> found.bits, found.errors
    (12, (4, 0))
    """
    i, q = (_expected_signs(match, reference, at) for match in pair)
    wrong_i, wrong_q = (y.real < 0) != (i < 0), (y.imag < 0) != (q < 0)
    sent = (i + 1j * q).astype(np.complex64) * np.float32(np.sqrt(0.5))
    errors = (int(np.count_nonzero(wrong_i)), int(np.count_nonzero(wrong_q)))
    slips, without = _slips(y, i, q, (wrong_i.astype(np.int32) + wrong_q), block)
    snr_db = signal_to_noise(y, sent)
    return Counts(len(at), errors, snr_db, generalised_mutual_information(y, sent), slips, without)


def _slips(y: Complex, i: Signs, q: Signs, wrong: npt.NDArray[np.int32], block: int) -> tuple[int, int]:
    """How often the carrier slipped by quarter turns, and the errors that are left when each block is turned back."""
    slips, turn, left = 0, 0, 0
    for begin in range(0, len(y), block):
        part = slice(begin, begin + block)
        errors = int(wrong[part].sum())
        counts = [errors]
        if errors > _SLIPPED * 2 * len(wrong[part]):
            for turned in (1, 2, 3):
                z = y[part] * 1j**turned
                counts.append(int(((z.real < 0) != (i[part] < 0)).sum() + ((z.imag < 0) != (q[part] < 0)).sum()))
        best = int(np.argmin(counts))
        slips += best != turn
        turn, left = best, left + counts[best]
    return slips, left


def unrepeated(
    y: Complex, matches: tuple[Match, ...], reference: Reference, at: npt.NDArray[np.intp]
) -> tuple[Match, ...]:
    """Which of the repetitions in the labels was sent first: delays known modulo the repetition, of the whole labels.

    It matters only where the labels end and begin anew, so the one with the fewest errors over all is taken; with so
    few to choose from and so many symbols, noise cannot look like one.

    >>> whole = np.array([[1, 1, -1, 1, 1, -1, 1], [1, -1, -1, 1, -1, -1, 1]], np.int8)       # 3 symbols, over and over
    >>> reference = Reference(whole, (0, 1), (0, 0), True, 3)
    >>> y = (whole[0] + 1j * whole[1]).astype(np.complex64)[None, :]
    >>> late = np.roll(y, -3, axis=1)                         # the record began with the second repetition
    >>> found = unrepeated(late, (Match(0, 0, 1, 1.0, 0.0, 0), Match(1, 0, 1, 1.0, 0.0, 0)), reference, np.arange(7))
    >>> [match.start for match in found]
    [3, 3]
    """
    length = reference.patterns.shape[1]
    rows = np.stack([y.real, y.imag], axis=1).reshape(len(matches), -1) < 0

    def moved(by: int) -> tuple[Match, ...]:
        return tuple(replace(match, start=(match.start + by) % length) for match in matches)

    def errors(by: int) -> int:
        expected = [_expected_signs(match, reference, at) < 0 for match in moved(by)]
        return sum(int(np.count_nonzero(row != one)) for row, one in zip(rows, expected, strict=True))

    steps = range(0, length, reference.repeats_after)
    return matches if len(steps) == 1 else moved(min(steps, key=errors))


def signal_to_noise(y: Complex, sent: Complex) -> float:
    """Es/N0 in dB, unbiased: y = c * sent + noise with c = <y, sent*> / <sent, sent*>.

    Scaling y onto the reference instead would report 1 + SNR. Limited to 60 dB, where rounding begins.

    >>> rng = np.random.default_rng(1)
    >>> sent = (rng.choice([-1, 1], 200_000) + 1j * rng.choice([-1, 1], 200_000)).astype(np.complex64)
    >>> noise = (rng.standard_normal(200_000) + 1j * rng.standard_normal(200_000)).astype(np.complex64)
    >>> round(signal_to_noise(sent + noise, sent), 1)       # one to one
    0.0
    """
    power = float(np.vdot(sent, sent).real)
    gain = complex(np.vdot(sent, y)) / power
    signal = abs(gain) ** 2 * power
    noise = float(np.vdot(y, y).real) - signal
    return float(10 * np.log10(max(signal, 1e-12 * power) / max(noise, 1e-6 * signal, 1e-18 * power)))


def evm_percent(snr_db: float) -> float:
    """Error vector magnitude, rms, against the known symbols, normalised to their average power.

    >>> round(evm_percent(20.0), 6)
    10.0
    """
    return float(100.0 * 10 ** (-snr_db / 20))


def generalised_mutual_information(y: Complex, sent: Complex) -> float:
    """Bits a QPSK symbol that bit-wise decoding can carry at most, for a decoder that assumes Gaussian noise.

    A. Alvarado et al., Journal of Lightwave Technology 33(20), 4338, 2015. y and sent are (symbols,); sent has unit
    power.

    >>> sent = np.array([1 + 1j, 1 - 1j, -1 + 1j, -1 - 1j], np.complex64) / np.sqrt(2)
    >>> round(generalised_mutual_information(sent * np.complex64(1 + 1e-4j), sent), 3)
    2.0
    """
    gain = complex(np.vdot(sent, y)) / float(np.vdot(sent, sent).real)
    straight = y / np.complex64(gain if gain else 1.0)
    variance = max(float(np.mean(np.abs(straight - sent) ** 2)), 1e-6)
    scale = np.float32(4.0 / variance)
    lost = 0.0
    for axis, expected in ((straight.real, sent.real), (straight.imag, sent.imag)):
        # -log likelihood ratio of the bit that was sent: 2 a r / (variance / 2), a the amplitude of one axis
        lost += float(np.mean(np.logaddexp(np.float32(0.0), -scale * axis * expected), dtype=np.float64))
    return 2.0 - lost / float(np.log(2.0))
