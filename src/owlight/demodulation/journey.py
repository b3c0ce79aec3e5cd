"""A capture's journey through a chain: stage after stage, each with its figures, to counted bits or to "no lock"."""

from __future__ import annotations

import time
from typing import Any

import numpy as np
import numpy.typing as npt

from owlight.demodulation.acquisition import Acquired, acquire, seen_imbalances, steady
from owlight.demodulation.chain import Chain
from owlight.demodulation.journal import Journal, NoLockError
from owlight.demodulation.lane_map import TRIBUTARIES
from owlight.demodulation.stages.carrier import carrier_phase, linewidth
from owlight.demodulation.stages.counting import Counts, count, evm_percent, unrepeated
from owlight.demodulation.stages.equaliser import equalise, least_squares_taps
from owlight.demodulation.stages.lanes import scale
from owlight.demodulation.stages.synchronisation import Reference, reference_of_labels, reference_of_order
from owlight.errors import InputError
from owlight.vocabulary.captures import Capture, Demodulation, Lane, Tributary

Complex = npt.NDArray[np.complex64]
Indices = npt.NDArray[np.intp]
_EDGE_SYMBOLS = 16
"""Symbols at the end of the record that stay uncounted: carrier recovery sees them from one side only."""


def demodulate(capture: Capture, chain: Chain, labels: npt.NDArray[Any] | None = None) -> Demodulation:
    """Count the errors of a capture; without lock the status is "no lock", the reason says why, and nothing is counted.

    `labels` (polarisations x pattern length, integers, I bit * 2 + Q bit) replace the chain's pattern order; they
    repeat. Words beside a lock name lanes that are not as planned. SNR, EVM (rms, against average power) and mutual
    information are means over the polarisations. InputError if a lane is missing or the reference cannot be used.
    """
    began = time.perf_counter()
    journal = Journal()
    lanes = _lanes(capture, chain)
    reference = _reference(chain, labels)
    tributaries: tuple[Tributary, ...] = ()
    snr_db = gmi_bits = None
    try:
        with journal.stage("scaling") as figures:
            z, found = scale(lanes, [belief.inverted for belief in chain.lanes], chain.stages.scaling.remove_mean)
            figures |= found
        acquired = acquire(z, capture.sample_rate_hz, chain, reference, journal)
        y, at = _held_out(acquired, chain, journal)
        tributaries, snr_db, gmi_bits = _tally(y, at, acquired, chain, reference, journal)
        status, reason = "locked", acquired.words
    except NoLockError as trouble:
        status, reason = "no lock", str(trouble)
    return Demodulation(
        capture=capture.id,
        chain_sha256=chain.sha256,
        status=status,
        reason=reason,
        tributaries=tributaries,
        snr_db=snr_db,
        evm_percent=None if snr_db is None else evm_percent(snr_db),
        gmi_bits=gmi_bits,
        stages=journal.reports(),
        seconds=time.perf_counter() - began,
    )


def _lanes(capture: Capture, chain: Chain) -> tuple[Lane, ...]:
    by_name = {lane.name: lane for lane in capture.lanes}
    missing = [belief.name for belief in chain.lanes if belief.name not in by_name]
    if missing:
        words = f"The capture has the lanes {', '.join(by_name)}; the chain also needs {', '.join(missing)}."
        raise InputError(f"{words} Give a capture with all lanes, or a chain without them.")
    lanes = tuple(by_name[belief.name] for belief in chain.lanes)
    if len({len(lane.codes) for lane in lanes}) != 1:
        raise InputError("The lanes of this capture differ in length. Give the lanes of one record.")
    return lanes


def _reference(chain: Chain, labels: npt.NDArray[Any] | None) -> Reference:
    signal = chain.signal
    try:
        if labels is None:
            return reference_of_order(signal.pattern_order, 2 * signal.polarisations, signal.tributary_offsets)
        if len(labels) != signal.polarisations:
            raise ValueError(f"it has {len(labels)} rows, and the signal {signal.polarisations} polarisations")
        return reference_of_labels(labels)
    except ValueError as trouble:
        raise InputError(f"This reference cannot be used: {trouble}.") from trouble


def _held_out(acquired: Acquired, chain: Chain, journal: Journal) -> tuple[Complex, Indices]:
    """All symbols after carrier recovery, and the indices of those that trained nothing."""
    settings, window = chain.stages.equaliser, chain.stages.carrier_phase.window_symbols
    x, taps = acquired.x, acquired.taps
    symbols = (x.shape[1] - settings.taps) // 2
    y = np.empty((len(taps), symbols), dtype=np.complex64)
    counted = np.ones(symbols, dtype=bool)
    with journal.stage("equaliser") as figures:
        for begin in range(0, symbols, settings.refresh_symbols):
            end = min(begin + settings.refresh_symbols, symbols)
            head = min(begin + settings.refresh_training_symbols, end) if begin else acquired.trained
            counted[begin:head] = False
            if begin and head < end:
                taps, _ = least_squares_taps(x, taps, (begin, head), acquired.turn, window, settings.ridge)
            y[:, begin:end] = equalise(x, taps, begin, end - begin)
        figures["trainings"] = float(-(-symbols // settings.refresh_symbols))
    counted[-_EDGE_SYMBOLS:] = False
    with journal.stage("carrier phase") as figures:
        y = steady(y, 0, acquired.turn)
        phase = carrier_phase(y, window)
        y *= np.exp(-1j * phase).astype(np.complex64)
        figures["window_symbols"] = float(window)
        if np.isfinite(width := linewidth(phase, window)):
            figures["linewidth_hz"] = width * chain.signal.symbol_rate_bd
    seen_imbalances(acquired, y, phase, chain, journal)
    return y, np.flatnonzero(counted)


def _tally(
    y: Complex, at: Indices, acquired: Acquired, chain: Chain, reference: Reference, journal: Journal
) -> tuple[tuple[Tributary, ...], float, float]:
    """Counts by tributary in their own order; means over the polarisations of noise (as SNR) and of information."""
    with journal.stage("counting") as figures:
        matches = unrepeated(y[:, at], acquired.alignment.matches, reference, at)
        block = chain.stages.counting.slip_block_symbols
        counts = [count(y[q, at], matches[2 * q : 2 * q + 2], reference, at, block) for q in range(len(y))]
        names = TRIBUTARIES[chain.signal.polarisations]
        found = {
            matches[2 * q + lane].expected: Tributary(
                names[matches[2 * q + lane].expected], one.bits, one.errors[lane], one.snr_db
            )
            for q, one in enumerate(counts)
            for lane in (0, 1)
        }
        noise = float(np.mean([10 ** (-one.snr_db / 10) for one in counts]))
        snr_db = float(-10 * np.log10(noise))
        gmi_bits = float(np.mean([one.gmi_bits for one in counts]))
        figures |= _figures(counts, at) | {"snr_db": snr_db, "evm_percent": evm_percent(snr_db), "gmi_bits": gmi_bits}
    return tuple(found[n] for n in sorted(found)), snr_db, gmi_bits


def _figures(counts: list[Counts], at: Indices) -> dict[str, float]:
    """How much was counted, where (each range from its first symbol to before its last), and the carrier's slips."""
    edges = np.flatnonzero(np.diff(at) > 1)
    begins, ends = at[np.concatenate([[0], edges + 1])], at[np.concatenate([edges, [len(at) - 1]])] + 1
    bits = sum(2 * one.bits for one in counts)
    figures = {
        "counted_symbols": float(len(at)),
        "slips": float(max(one.slips for one in counts)),
        "slip_corrected_ber": sum(one.errors_without_slips for one in counts) / bits,
    }
    for number, (begin, end) in enumerate(zip(begins, ends, strict=True), 1):
        figures |= {f"counted_{number}_from_symbol": float(begin), f"counted_{number}_to_symbol": float(end)}
    return figures
