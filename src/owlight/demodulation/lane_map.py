"""Lanes and tributaries by name: how four lanes can make two polarisations, and what the alignment says of them."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from owlight.demodulation.chain import Chain
from owlight.demodulation.journal import NoLockError
from owlight.demodulation.stages.synchronisation import Alignment, Reference

Complex = npt.NDArray[np.complex64]
TRIBUTARIES = {1: ("I", "Q"), 2: ("XI", "XQ", "YI", "YQ")}


@dataclass(frozen=True)
class Pairing:
    """Which lanes belong together, and whether the second polarisation is mirrored against the first."""

    order: tuple[int, ...]
    mirrored: bool = False

    def apply(self, z: Complex) -> Complex:
        """The same lanes made into polarisations this way."""
        if not self.mirrored and self.order == tuple(range(len(self.order))):
            return z
        lanes = [part for polarisation in z for part in (polarisation.real, polarisation.imag)]
        second = lanes[self.order[2]] + (-1j if self.mirrored else 1j) * lanes[self.order[3]]
        return np.stack([lanes[self.order[0]] + 1j * lanes[self.order[1]], second]).astype(np.complex64)

    def words(self, lanes: tuple[str, ...], all_mirrored: bool) -> str:
        """What is not as the bench has it; "" if nothing."""
        pairs = [tuple(lanes[n] for n in self.order[k : k + 2]) for k in range(0, len(self.order), 2)]
        told = []
        if self.order != tuple(range(len(self.order))):
            told.append(
                " and ".join(f"{a} with {b}" for a, b in pairs) + " make a polarisation, not as the bench has it"
            )
        for number, (a, b) in enumerate(pairs):
            if all_mirrored != (self.mirrored and number == 1):
                told.append(f"{a} and {b} are exchanged, or one of them is inverted")
        return "; ".join(told)


def pairings(lanes: int, permute: bool) -> tuple[Pairing, ...]:
    """As believed first; the equaliser and the synchronisation take every other exchange and inversion themselves."""
    if lanes == 2:
        return (Pairing((0, 1)),)
    orders = ((0, 1, 2, 3), (0, 2, 1, 3), (0, 3, 2, 1))
    every = tuple(Pairing(order, mirrored) for order in orders for mirrored in (False, True))
    return every if permute else every[:1]


def alignment_figures(alignment: Alignment, chain: Chain, reference: Reference) -> dict[str, float]:
    """Peaks, delays and the plan; the probability that any of the delays searched in pure noise gives such a peak."""
    names = TRIBUTARIES[chain.signal.polarisations]
    hypotheses = len(alignment.matches) ** 2 * reference.repeats_after
    noise_peak = math.sqrt(2.0 / alignment.symbols) * _inverse_tail(1e-9 / hypotheses)
    figures = {
        "sync_peak": alignment.least_peak,
        "sync_second": alignment.largest_second,
        "hypotheses": float(hypotheses),
        "peak_of_noise_at_1e_9": noise_peak,
        "correlated_symbols": float(alignment.symbols),
    }
    for match in alignment.matches:
        figures[f"start_{names[match.expected].lower()}_symbols"] = float(match.start)
    for output, mirrored in enumerate(alignment.conjugated, 1):
        figures[f"mirrored_{output}"] = float(mirrored)
    if reference.planned:
        figures["off_plan_symbols"] = float(alignment.off_plan_symbols)
    return figures


def _inverse_tail(probability: float) -> float:
    """x with exp(-x^2) = probability: a bound of the normal tail that errs on the safe side."""
    return math.sqrt(-math.log(probability))


def insist(alignment: Alignment, chain: Chain) -> None:
    """NoLockError with the best correlation if any tributary's pattern does not stand out."""
    limits = chain.stages.synchronisation
    names = TRIBUTARIES[chain.signal.polarisations]
    for number, match in enumerate(alignment.matches):
        if match.peak < limits.least_peak or match.peak < limits.least_margin * match.second:
            lost = f"output {number // 2 + 1} {'IQ'[number % 2]}" if len(names) > 2 else "IQ"[number % 2]
            needed = max(limits.least_peak, limits.least_margin * match.second)
            best = f"best correlation {match.peak:.3f} (needed {needed:.3f}), next best {match.second:.3f}"
            raise NoLockError(f"the pattern was not found in {lost}: {best}")


def alignment_words(alignment: Alignment, chain: Chain) -> str:
    """What a person should know of the lanes; "" if all is as planned."""
    names = TRIBUTARIES[chain.signal.polarisations]
    told = []
    if alignment.off_plan_symbols > chain.stages.synchronisation.lag_tolerance_symbols:
        off = ", ".join(f"{names[m.expected]} {m.off_plan:+d}" for m in alignment.matches)
        told.append(f"the tributaries' delays differ from the plan by symbols: {off}")
    pairs = [tuple(m.expected for m in alignment.matches[n : n + 2]) for n in range(0, len(names), 2)]
    if any({e // 2 for e in pair} != {pair[0] // 2} for pair in pairs):
        carried = " and ".join("with ".join(f"{names[e]} " for e in pair).strip() for pair in pairs)
        told.append(f"tributaries of different polarisations arrive together: {carried}")
    if any(alignment.conjugated) and not all(alignment.conjugated):
        mirrored = pairs[alignment.conjugated.index(True)]
        told.append(f"{' and '.join(names[e] for e in sorted(mirrored))} were sent exchanged, or one of them inverted")
    return "; ".join(told)
