"""A capture's journey from converter codes to counted bits. No compiled kernel is loaded before one is used."""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from owlight.demodulation.chain import Chain, LaneBelief, make_chain
    from owlight.demodulation.journey import demodulate
    from owlight.demodulation.stages.carrier import carrier_phase, frequency_offset, linewidth
    from owlight.demodulation.stages.clock import ClockEstimate, band_edges, coarse_frequency_offset, recover_clock
    from owlight.demodulation.stages.counting import count, generalised_mutual_information, signal_to_noise
    from owlight.demodulation.stages.equaliser import blind_taps, equalise, least_squares_taps
    from owlight.demodulation.stages.front import Front, block_lengths, matched_filter
    from owlight.demodulation.stages.image import Imbalance, imbalances
    from owlight.demodulation.stages.lanes import block_spectra, deskew, orthonormalise, scale
    from owlight.demodulation.stages.synchronisation import Alignment, synchronise

_HOMES = {
    "chain": ("Chain", "LaneBelief", "make_chain"),
    "journey": ("demodulate",),
    "stages.image": ("Imbalance", "imbalances"),
    "stages.lanes": ("block_spectra", "deskew", "orthonormalise", "scale"),
    "stages.clock": ("ClockEstimate", "band_edges", "coarse_frequency_offset", "recover_clock"),
    "stages.front": ("Front", "block_lengths", "matched_filter"),
    "stages.equaliser": ("blind_taps", "equalise", "least_squares_taps"),
    "stages.carrier": ("carrier_phase", "frequency_offset", "linewidth"),
    "stages.synchronisation": ("Alignment", "synchronise"),
    "stages.counting": ("count", "generalised_mutual_information", "signal_to_noise"),
}
_HOME_OF = {name: home for home, names in _HOMES.items() for name in names}


def __getattr__(name: str) -> Any:
    if name not in _HOME_OF:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(importlib.import_module(f"{__name__}.{_HOME_OF[name]}"), name)


__all__ = [
    "Chain",
    "LaneBelief",
    "make_chain",
    "demodulate",
    "block_spectra",
    "scale",
    "deskew",
    "orthonormalise",
    "Imbalance",
    "imbalances",
    "band_edges",
    "coarse_frequency_offset",
    "ClockEstimate",
    "recover_clock",
    "Front",
    "block_lengths",
    "matched_filter",
    "blind_taps",
    "equalise",
    "least_squares_taps",
    "frequency_offset",
    "carrier_phase",
    "linewidth",
    "Alignment",
    "synchronise",
    "count",
    "generalised_mutual_information",
    "signal_to_noise",
]
