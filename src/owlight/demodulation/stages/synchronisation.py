"""Which tributary is which: every received real tributary against every expected one, at every delay.

Real tributaries, since a complex correlation of I and Q from one pattern has side peaks at half its height. Planned
offsets into the pattern tell tributaries of one pattern apart: their delays must agree once the plan is taken out.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import scipy.fft

from owlight.modulation import bits_of_labels, pattern

Complex = npt.NDArray[np.complex64]
Signs = npt.NDArray[np.int8]
_CHANCE = 64


@dataclass(frozen=True)
class Reference:
    """What each tributary sends, -1 and 1: tributary t sends patterns[source[t]] from `offsets[t]` on, repeated.

    Without a plan (`planned` false) offsets are unknown and any delays will do. `repeats_after`: labels may hold a
    shorter pattern several times over; delays are then found modulo its length.
    """

    patterns: Signs
    source: tuple[int, ...]
    offsets: tuple[int, ...]
    planned: bool
    repeats_after: int


@dataclass(frozen=True)
class Match:
    """A received tributary: it carries `expected`, symbol 0 being `start` of its pattern, inverted if `sign` is -1."""

    expected: int
    start: int
    sign: int
    peak: float
    second: float
    off_plan: int


@dataclass(frozen=True)
class Alignment:
    """One match a received tributary, in the order I, Q, I, Q of the outputs.

    `off_plan_symbols`: the most that a delay differs from the plan. `conjugated`: one an output, whether it is mirrored
    (I and Q exchanged or one inverted). `symbols`: how many were correlated.
    """

    matches: tuple[Match, ...]
    least_peak: float
    largest_second: float
    off_plan_symbols: int
    conjugated: tuple[bool, ...]
    symbols: int


def reference_of_order(order: int, tributaries: int, offsets: tuple[int, ...]) -> Reference:
    """All tributaries send the same maximal-length pattern, each from its own offset.

    >>> reference_of_order(7, 2, (0, 40)).patterns.shape
    (1, 127)
    """
    signs = (2 * pattern(order).astype(np.int8) - 1)[None, :]
    known = offsets[:tributaries] if offsets else (0,) * tributaries
    return Reference(signs, (0,) * tributaries, tuple(known), bool(offsets), signs.shape[1])


def reference_of_labels(labels: npt.NDArray[np.integer]) -> Reference:
    """From QPSK labels (polarisations, pattern length), label = I bit * 2 + Q bit; the pattern repeats.

    >>> reference_of_labels(np.array([[0b10, 0b11]])).patterns.tolist()
    [[1, 1], [-1, 1]]
    """
    if labels.ndim != 2 or labels.size == 0 or labels.min() < 0 or labels.max() > 3:
        raise ValueError(f"QPSK labels are polarisations x pattern length of 0 to 3; these are {labels.shape}")
    bits = bits_of_labels(labels, 2).astype(np.int8)
    signs = np.ascontiguousarray((2 * bits - 1).transpose(0, 2, 1).reshape(-1, labels.shape[1]))
    return Reference(signs, tuple(range(len(signs))), (0,) * len(signs), True, _repeats_after(signs))


def _repeats_after(signs: Signs) -> int:
    """The least distance at which the patterns are their own continuation, all of them; their length if there is none.

    >>> _repeats_after(np.tile(np.where(pattern(7) > 0, 1, -1).astype(np.int8), 3)[None, :300])
    127
    """
    length = signs.shape[1]
    padded = scipy.fft.next_fast_len(2 * length, real=True)
    spectra = scipy.fft.rfft(signs.astype(np.float64), padded, axis=1)
    agreement = scipy.fft.irfft((np.abs(spectra) ** 2).sum(axis=0), padded)[:length]
    whole = len(signs) * (length - np.arange(length)) - 0.5
    # a few symbols at the end are alike by chance
    found = 1 + np.flatnonzero(agreement[1 : max(1, length - _CHANCE)] > whole[1 : max(1, length - _CHANCE)])
    return int(found[0]) if len(found) else length


def synchronise(y: Complex, reference: Reference, tolerance_symbols: int) -> Alignment:
    """The best assignment of received to expected tributaries; whether it is good enough is for the caller to say.

    y is (outputs, symbols) after carrier recovery, up to quarter turns, mirrored or not, outputs in any order. First
    comes agreement with the plan within `tolerance_symbols`, then the height of the peaks. Peaks are correlation
    coefficients; the second is the highest at any other delay.

    >>> signs = (2 * pattern(9).astype(float) - 1)
    >>> sent = np.roll(signs, -40) + 1j * np.roll(signs, -140)     # planned offsets 0 and 100, 40 symbols into it
    >>> found = synchronise((1j * sent[None, :]).astype(np.complex64), reference_of_order(9, 2, (0, 100)), 16)
    >>> [(m.expected, m.start, m.sign) for m in found.matches], found.conjugated
    ([(1, 140, -1), (0, 40, 1)], (False,))
    """
    received = np.ascontiguousarray(np.stack([y.real, y.imag], axis=1).reshape(2 * len(y), -1), dtype=np.float32)
    period = reference.repeats_after
    peaks = [[_peak(row, one[:period]) for one in reference.patterns] for row in received]
    count = len(received)
    best: tuple[tuple[int, float], tuple[Match, ...], int] | None = None
    for order in itertools.permutations(range(count)):
        chosen = [peaks[t][reference.source[e]] for t, e in enumerate(order)]
        delays = [(start - reference.offsets[e]) % period for (start, *_), e in zip(chosen, order, strict=True)]
        off = _distances(delays, period) if reference.planned else [0] * count
        agreeing = sum(abs(distance) <= tolerance_symbols for distance in off)
        matches = tuple(
            Match(e, start, 1 if value > 0 else -1, abs(value), second, distance)
            for e, (start, value, second), distance in zip(order, chosen, off, strict=True)
        )
        score = (agreeing, sum(m.peak for m in matches))
        if best is None or score > best[0]:
            best = (score, matches, max(abs(distance) for distance in off))
    assert best is not None
    _, matches, off_plan = best
    return Alignment(
        matches=matches,
        least_peak=min(m.peak for m in matches),
        largest_second=max(m.second for m in matches),
        off_plan_symbols=off_plan,
        conjugated=tuple(reference.planned and _mirrored(*matches[2 * q : 2 * q + 2]) for q in range(count // 2)),
        symbols=y.shape[1],
    )


def _mirrored(i: Match, q: Match) -> bool:
    """Whether (I, Q) arrive as a reflection, not a rotation, of what was sent."""
    straight = i.expected % 2 == 0
    return (i.sign * q.sign < 0) if straight else (i.sign * q.sign > 0)


def _distances(delays: list[int], period: int) -> list[int]:
    """How far each delay is from the one that most of them agree on best, along the circle."""

    def apart(a: int, b: int) -> int:
        return (a - b + period // 2) % period - period // 2

    middle = min(delays, key=lambda d: sorted(abs(apart(other, d)) for other in delays)[: len(delays) // 2 + 1])
    return [apart(d, middle) for d in delays]


def _peak(row: npt.NDArray[np.float32], signs: Signs) -> tuple[int, float, float]:
    """(start in the pattern, signed correlation there, highest elsewhere) of one tributary against one pattern."""
    period, symbols = len(signs), len(row)
    if symbols >= period:
        row_once = np.bincount(np.arange(symbols) % period, weights=row, minlength=period).astype(np.float32)
        length, extended = period, signs
    else:
        row_once, length = row, scipy.fft.next_fast_len(period + symbols, real=True)
        extended = np.concatenate([signs, signs[:symbols]])
    spectrum = scipy.fft.rfft(extended.astype(np.float32), length)
    spectrum *= np.conj(scipy.fft.rfft(row_once, length))
    correlation = scipy.fft.irfft(spectrum, length)[:period]
    correlation /= max(float(np.sqrt(np.vdot(row, row) * symbols)), 1e-30)
    start = int(np.argmax(np.abs(correlation)))
    value = float(correlation[start])
    correlation[start] = 0.0
    return start, value, float(np.abs(correlation).max())
