"""The sequence file: what to measure, in what order, how long, with which demodulation."""

from owlight.sequence.model import Axis, Demodulation, Reference, Sequence
from owlight.sequence.reading import read_sequence

__all__ = ["Axis", "Demodulation", "Reference", "Sequence", "read_sequence"]
