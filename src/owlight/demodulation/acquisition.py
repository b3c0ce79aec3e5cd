"""What the head of a record teaches: clock, equaliser, carrier, where the pattern stands. Nothing here is counted."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from owlight.demodulation.chain import Chain
from owlight.demodulation.journal import Journal, NoLockError
from owlight.demodulation.lane_map import Pairing, alignment_figures, alignment_words, insist, pairings
from owlight.demodulation.stages import clock as clocks
from owlight.demodulation.stages.carrier import carrier_phase, decide, frequency_offset
from owlight.demodulation.stages.equaliser import SINGULAR, blind_taps, equalise, least_squares_taps, likeness
from owlight.demodulation.stages.front import Front, carrier_turns, matched_filter
from owlight.demodulation.stages.image import Imbalance, imbalances
from owlight.demodulation.stages.lanes import block_spectra, orthonormalise
from owlight.demodulation.stages.synchronisation import Alignment, Reference, synchronise

Complex = npt.NDArray[np.complex64]
LEAST_SYMBOLS = 2000
_CARRIER_REACH = 0.25
"""How far from zero the carrier is looked for, in symbol rates."""
_CARRIER_STANDS_OUT = 1.5
_SIGNIFICANT = 4.0
"""Standard uncertainties beyond which a skew is corrected; closer to zero a correction would only add noise."""
_HARMLESS_SYMBOLS = 0.01
_CORRECTIONS = 3
"""The estimate is of first order: of a skew of a tenth of a symbol a tenth is left for the next."""


@dataclass(frozen=True)
class Acquired:
    """`x` at two samples a symbol; `turn` is the carrier's in radians a symbol; symbols before `trained` taught.

    `moved`: radians by which the front turned the carrier back, at the first sample of x and a sample.
    """

    x: Complex
    taps: Complex
    turn: float
    moved: tuple[float, float]
    trained: int
    alignment: Alignment
    words: str
    imbalances: list[Imbalance]


def acquire(z: Complex, sample_rate_hz: float, chain: Chain, reference: Reference, journal: Journal) -> Acquired:
    """Try the lanes as believed, then every other way to make polarisations of them; NoLockError if none works."""
    tried = pairings(2 * len(z), chain.stages.synchronisation.permute_lanes)
    first: tuple[Journal, NoLockError] | None = None
    for pairing in tried:
        attempt = Journal()
        skews_s = tuple(chain.lanes[lane].skew_s * chain.stages.deskew.believed for lane in pairing.order)
        try:
            found = _train(pairing, z, (sample_rate_hz, skews_s), chain, reference, attempt)
        except NoLockError as trouble:
            first = first or (attempt, trouble)
            continue
        for _ in range(_CORRECTIONS):
            corrected = _corrected(skews_s, found.imbalances, chain)
            if corrected == skews_s:
                break
            skews_s = corrected
            found = _train(pairing, z, (sample_rate_hz, skews_s), chain, reference, attempt)
        journal.take_over(attempt)
        return found
    assert first is not None
    journal.take_over(first[0])
    raise NoLockError(str(first[1]) + (f" ({len(tried)} pairings of the lanes tried)" if len(tried) > 1 else ""))


def _corrected(skews_s: tuple[float, ...], seen: list[Imbalance], chain: Chain) -> tuple[float, ...]:
    """Skews with what was seen beyond them, where it is significant and would cost anything."""
    corrected = list(skews_s)
    for p, one in enumerate(seen):
        worth = max(_SIGNIFICANT * one.skew_u_s, _HARMLESS_SYMBOLS / chain.signal.symbol_rate_bd)
        if chain.stages.deskew.residual == "correct" and abs(one.skew_s) > worth:
            corrected[2 * p + 1] += one.skew_s
    return tuple(corrected)


def _train(
    pairing: Pairing,
    z: Complex,
    rate_and_skews: tuple[float, tuple[float, ...]],
    chain: Chain,
    reference: Reference,
    journal: Journal,
) -> Acquired:
    names = tuple(belief.name for belief in chain.lanes)
    with journal.stage("deskew") as figures:
        for lane, skew_s in zip(pairing.order, rate_and_skews[1], strict=True):
            figures[f"skew_{names[lane].lower()}_ps"] = 1e12 * skew_s
    x, moved = _front(pairing.apply(z), *rate_and_skews, chain, journal)
    trained = _training_symbols(x.shape[1] // 2, chain)
    taps, turn = _blind(x, trained, 2 * moved[1], chain, journal)
    settings, window = chain.stages.equaliser, chain.stages.carrier_phase.window_symbols
    with journal.stage("equaliser") as figures:
        for _ in range(2):
            taps, found = least_squares_taps(x, taps, (0, trained), turn, window, settings.ridge)
        y = steady(equalise(x, taps, 0, trained), 0, turn)
        _insist_on_two(likeness(y) if len(y) == 2 else 0.0)
        coefficients = taps.shape[1] * taps.shape[2]
        figures |= {**found, "trained_symbols": float(trained), "trained_symbols_a_coefficient": trained / coefficients}
    with journal.stage("carrier phase"):
        phase = carrier_phase(y, window)
        y *= np.exp(-1j * phase).astype(np.complex64)
    with journal.stage("synchronisation") as figures:
        alignment = synchronise(y, reference, chain.stages.synchronisation.lag_tolerance_symbols)
        figures |= alignment_figures(alignment, chain, reference)
        insist(alignment, chain)
    told = (pairing.words(names, all(alignment.conjugated)), alignment_words(alignment, chain))
    acquired = Acquired(x, taps, turn, moved, trained, alignment, "; ".join(w for w in told if w), [])
    return replace(acquired, imbalances=seen_imbalances(acquired, y, phase, chain, journal))


def seen_imbalances(
    acquired: Acquired, y: Complex, phase: npt.NDArray[np.float64], chain: Chain, journal: Journal
) -> list[Imbalance]:
    """What is left between I and Q, from the symbols y as decided (from symbol 0, their carrier's phase taken out)."""
    with journal.stage("deskew") as figures:
        turning = np.exp(1j * (phase + acquired.turn * np.arange(y.shape[1]))).astype(np.complex64)
        middle = acquired.taps.shape[2] // 2
        moved = (acquired.moved[0] + middle * acquired.moved[1], acquired.moved[1])
        seen = imbalances(acquired.x[:, middle:], decide(y) * turning, moved, chain.signal.symbol_rate_bd)
        for key, one in zip("xy", seen, strict=False):
            figures[f"residual_skew_{key}_ps"] = 1e12 * one.skew_s
            figures[f"residual_skew_{key}_u_ps"] = 1e12 * one.skew_u_s
    with journal.stage("orthonormalisation") as figures:
        for key, one in zip("xy", seen, strict=False):
            applied = figures.get(f"applied_quadrature_{key}_deg", 0.0), figures.get(f"applied_gain_{key}_db", 0.0)
            figures[f"quadrature_error_{key}_deg"] = applied[0] + one.quadrature_error_deg
            figures[f"quadrature_error_{key}_u_deg"] = one.quadrature_error_u_deg
            figures[f"gain_imbalance_{key}_db"] = applied[1] + one.gain_i_over_q_db
            figures[f"gain_imbalance_{key}_u_db"] = one.gain_u_db
    return seen


def _training_symbols(symbols: int, chain: Chain) -> int:
    if symbols < LEAST_SYMBOLS:
        raise NoLockError(f"only {max(symbols, 0)} symbols stand in this record, and {LEAST_SYMBOLS} are needed")
    return min(chain.stages.equaliser.training_symbols, max(symbols // 3, min(symbols // 2, 8192)))


def _blind(x: Complex, trained: int, moved: float, chain: Chain, journal: Journal) -> tuple[Complex, float]:
    """Taps that know no pattern yet, and the carrier's turn a symbol; `moved` of it were taken out before."""
    settings = chain.stages.equaliser
    with journal.stage("equaliser") as figures:
        blind = min(settings.blind_symbols, trained)
        taps, found = blind_taps(x, chain.signal.polarisations, settings.taps, blind, settings.step)
        figures |= found
        _insist_on_two(found["output_likeness"])
    with journal.stage("frequency offset") as figures:
        turn, line_db = 0.0, 0.0
        if chain.stages.frequency_offset.on:
            turn, line_db = frequency_offset(equalise(x, taps, 0, trained))
        offset_hz = (moved + turn) / (2 * np.pi) * chain.signal.symbol_rate_bd
        figures |= {"frequency_offset_hz": offset_hz, "line_db": line_db}
    return taps, turn


def _insist_on_two(alike: float) -> None:
    if alike > SINGULAR:
        raise NoLockError("both outputs of the equaliser carry the same polarisation")


def steady(y: Complex, begin: int, turn: float) -> Complex:
    """Without the frequency offset; y begins at symbol `begin`."""
    return np.asarray(y * np.exp(-1j * turn * np.arange(begin, begin + y.shape[1])).astype(np.complex64))


def _front(
    z: Complex, sample_rate_hz: float, skews_s: tuple[float, ...], chain: Chain, journal: Journal
) -> tuple[Complex, tuple[float, float]]:
    """The signal at two samples a symbol, and how far its carrier was turned back at the first sample and a sample."""
    signal, stages = chain.signal, chain.stages
    nominal = sample_rate_hz / signal.symbol_rate_bd
    if nominal < 1.0 + signal.rolloff:
        raise NoLockError(f"{nominal:.2f} samples a symbol do not hold the signal; {1 + signal.rolloff:.2f} are needed")
    length = min(clocks.estimation_length(nominal), z.shape[1] // 4)
    if length < 64:
        raise NoLockError(f"{z.shape[1]} samples are too few")
    with journal.stage("clock recovery"):
        spectra = block_spectra(z, length)
    apart = round(length / nominal)
    half_width = max(2, int(signal.rolloff / 2 * length / nominal))
    with journal.stage("matched filter") as figures:
        centre = _centre(spectra, apart, half_width, nominal, stages.matched_filter.centre)
        centre_hz = centre * sample_rate_hz / length
        figures["centre_hz"] = centre_hz
    with journal.stage("clock recovery") as figures:
        edges = clocks.band_edges(spectra, apart, centre, half_width)
        largest_ppm = stages.clock_recovery.largest_offset_ppm if stages.clock_recovery.on else 0.0
        found = clocks.recover_clock(edges, length, nominal, largest_ppm)
        figures |= {"clock_offset_ppm": found.clock_offset_ppm, "clock_quality": found.quality}
    with journal.stage("orthonormalisation") as figures:
        highest_hz = (1 + signal.rolloff) / 2 * signal.symbol_rate_bd + abs(centre_hz)
        try:
            matrices, errors = orthonormalise(spectra, skews_s, sample_rate_hz, highest_hz)
        except ValueError as trouble:
            raise NoLockError(str(trouble)) from trouble
        if stages.orthonormalisation.on:
            figures |= errors
        else:
            matrices = np.broadcast_to(np.eye(2), matrices.shape)
    with journal.stage("matched filter") as figures:
        front = Front(sample_rate_hz, signal.symbol_rate_bd, signal.rolloff, skews_s, matrices, centre_hz, found)
        block, overlap = stages.matched_filter.block_samples, stages.matched_filter.overlap_samples
        x = matched_filter(z, front, block, overlap)
    return x, carrier_turns(front, block, overlap)


def _centre(spectra: Complex, apart: int, half_width: int, samples_a_symbol: float, wanted: bool) -> int:
    """The carrier in bins; zero where the band's edges do not show it."""
    if not wanted:
        return 0
    room = (1.0 - 1.0 / samples_a_symbol) / 2 * spectra.shape[-1] - 2 * half_width
    reach = int(min(_CARRIER_REACH * apart, room))
    if reach < 1:
        return 0
    centre, stands_out = clocks.coarse_frequency_offset(spectra, apart, half_width, reach)
    return centre if stands_out > _CARRIER_STANDS_OUT else 0
