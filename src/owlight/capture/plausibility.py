"""Is a record plausible at all? One bad finding, and it yields no BER."""

from __future__ import annotations

from collections.abc import Collection

import numpy as np

from owlight.statistics.checks.capture import clipping, dead_lane, duplicate_capture
from owlight.statistics.checks.finding import certain
from owlight.vocabulary.captures import Capture, Codes
from owlight.vocabulary.events import Check


def check_capture(capture: Capture, previous_sha256s: Collection[str], expected_length: int) -> tuple[Check, ...]:
    """Clipping, dead or stuck lanes, a record delivered before, a short record; at least `expected_length` samples."""
    subject = f"capture {capture.id.point}/{capture.id.attempt}/{capture.id.number}"
    lanes = capture.lanes
    return (
        _record_length(subject, capture, expected_length),
        clipping(subject, {lane.name: lane.clipped_fraction for lane in lanes}),
        dead_lane(subject, {lane.name: _deviation(lane.codes) for lane in lanes}),
        duplicate_capture(subject, {lane.name: lane.sha256 for lane in lanes}, previous_sha256s),
    )


def _deviation(codes: Codes) -> float:
    return float(np.std(codes, dtype=np.float64)) if codes.size else 0.0


def _record_length(subject: str, capture: Capture, expected: int) -> Check:
    """Every lane as long as the others, and long enough."""
    lengths = {lane.name: len(lane.codes) for lane in capture.lanes}
    name, fewest = min(lengths.items(), key=lambda item: item[1])
    uneven = len(set(lengths.values())) > 1
    words = f"lane {name} has {fewest} samples; {expected} were asked for"
    words += " and the lanes differ in length" if uneven else ""
    return certain("record length", subject, float(fewest), float(expected), uneven or fewest < expected, words)
