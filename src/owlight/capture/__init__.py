"""Captures from files, and whether a capture is plausible at all."""

from owlight.capture.npz import read_npz
from owlight.capture.plausibility import check_capture

__all__ = ["check_capture", "read_npz"]
