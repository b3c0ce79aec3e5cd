"""What is sent: patterns, constellations and their labels, pulse shapes."""

from owlight.modulation.constellations import bits_of_labels, constellation, levels
from owlight.modulation.patterns import ORDERS, pattern, spread_offsets
from owlight.modulation.pulses import root_raised_cosine, root_raised_cosine_spectrum

__all__ = [
    "ORDERS",
    "bits_of_labels",
    "constellation",
    "levels",
    "pattern",
    "root_raised_cosine",
    "root_raised_cosine_spectrum",
    "spread_offsets",
]
