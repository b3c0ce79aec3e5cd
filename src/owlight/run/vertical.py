"""The oscilloscope's vertical range: from throw-away captures, common to a lane pair, from a finite ladder.

A fixed range decides the curve model: the converter's noise then belongs to the part that falls with power. So the
range is found once a curve, at its highest planned power, and a lane pair shares it, else I and Q differ in gain.
"""

from __future__ import annotations

import math

import numpy as np

from owlight.errors import InstrumentError
from owlight.run.night import Night
from owlight.vocabulary.captures import Capture, CaptureId
from owlight.vocabulary.events import Note
from owlight.vocabulary.plan import Attempt, CaptureRequest, Point
from owlight.vocabulary.seeds import seed_for
from owlight.vocabulary.terms import RECEIVED_POWER
from owlight.vocabulary.values import Term

# 4 x rms to the rail: a Gaussian tail of 6e-5 clips; the converter costs about 0.04 dB of QPSK at 5.5 effective bits
FILL_RMS = 4.0
LADDER_STEPS_PER_DECADE = 12  # ratio 1.21: the range is never more than that too wide
_FIRST_RANGE_V = 0.4
_MOST_CLIPPED = 1e-3
_MOST_TRIES = 8


def rung(volts: float) -> float:
    """The smallest rung of the ladder that is not below `volts`.

    >>> rung(0.1), round(rung(0.101), 4)
    (0.1, 0.1212)
    """
    step = math.ceil(round(math.log10(volts) * LADDER_STEPS_PER_DECADE, 9))
    return float(f"{10.0 ** (step / LADDER_STEPS_PER_DECADE):.6g}")


def set_vertical(night: Night, attempt: Attempt) -> None:
    """Set the ranges for this stay, finding them first where they are not known yet; ends at the stay's own power."""
    request = night.plan.capture
    if request is None:
        return
    follow = request.vertical == "follow"
    curve = f"point {attempt.point.index}" if follow else attempt.point.group
    found = night.ranges_v.get(curve)
    if found is None:
        strongest = attempt.point if follow else _strongest(night, attempt.point)
        night.announce(seed_for(night.plan.seed, "vertical", strongest.index), attempt.planned_time_s)
        found = night.ranges_v[curve] = _find(night, request, strongest)
    for channel, range_v in enumerate(found, 1):
        night.bench.set(Term("oscilloscope", f"range_{channel}"), range_v)


def _strongest(night: Night, point: Point) -> Point:
    def level(candidate: Point) -> float:
        value = candidate.value(RECEIVED_POWER)
        return -math.inf if value is None else float(value)

    return max((p for p in night.plan.points if p.group == point.group), key=level)


def _find(night: Night, request: CaptureRequest, strongest: Point) -> tuple[float, ...]:
    power_dbm = strongest.value(RECEIVED_POWER)
    if power_dbm is not None:
        night.bench.set_received_power(float(power_dbm))
    ranges_v = (_FIRST_RANGE_V,) * len(request.lanes)
    for trial in range(_MOST_TRIES):
        for channel, range_v in enumerate(ranges_v, 1):
            night.bench.set(Term("oscilloscope", f"range_{channel}"), range_v)
        seed = seed_for(night.plan.seed, "vertical", strongest.index, trial)
        night.announce(seed, 0.0)
        capture = night.bench.capture(CaptureId(strongest.index, 0, trial), seed, 0.0, request)
        _insist_on_new(night, capture)
        wanted_v = _wanted(capture, ranges_v)
        if wanted_v == ranges_v:
            words = ", ".join(
                f"{lane.name} {range_v:g} V" for lane, range_v in zip(capture.lanes, ranges_v, strict=True)
            )
            night.emit(Note(night.stamper.stamp(), "info", f"Vertical range from a throw-away capture: {words}."))
            return ranges_v
        ranges_v = wanted_v
    raise InstrumentError(
        "No vertical range fits the lanes: they clip or vanish at every range tried; the bench is made safe. "
        "Look at the receiver's gain and at the lanes with a capture by hand.",
        "oscilloscope",
    )


def _insist_on_new(night: Night, capture: Capture) -> None:
    """A range judged from a record that was delivered before would be wrong for the whole curve."""
    hashes = {lane.sha256 for lane in capture.lanes}
    if hashes <= night.seen_sha256:
        raise InstrumentError(
            "The oscilloscope delivered an old record again, so no vertical range can be found; the bench is made "
            "safe. Look at its trigger and at how its driver arms it.",
            "oscilloscope",
        )
    night.seen_sha256 |= hashes


def _wanted(capture: Capture, ranges_v: tuple[float, ...]) -> tuple[float, ...]:
    """The range each lane pair should have, judged from a capture at `ranges_v`."""
    wanted: list[float] = []
    for first in range(0, len(capture.lanes), 2):
        pair = capture.lanes[first : first + 2]
        if max(lane.clipped_fraction for lane in pair) > _MOST_CLIPPED:
            wanted += [rung(2.0 * ranges_v[first])] * len(pair)
            continue
        rms_v = max(float(np.std(lane.codes.astype(np.float64))) * lane.volts_per_code for lane in pair)
        range_v = rung(max(2.0 * FILL_RMS * rms_v, ranges_v[first] / 30.0))
        # one rung narrower than what is set is within the ladder's own step: keep, or two captures could alternate
        keep = ranges_v[first] / 1.25 <= range_v <= ranges_v[first]
        wanted += [ranges_v[first] if keep else range_v] * len(pair)
    return tuple(wanted)
