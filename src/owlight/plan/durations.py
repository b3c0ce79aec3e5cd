"""How long things are expected to take and how much they fill: settled before the night, so planned times are too.

Round figures of a bench: they order the night's drift and warn of a full disk, and promise nothing.
"""

from __future__ import annotations

from collections.abc import Collection, Iterable

from owlight.vocabulary.plan import CaptureRequest, Condition, StopRule
from owlight.vocabulary.terms import RECEIVED_POWER
from owlight.vocabulary.values import Setting, Term

OPENING_S = 60.0
"""Identify, bring up the light in steps, find the vertical range."""
CLOSING_S = 10.0
STEERING_S = 4.0
"""Attenuator moves in steps with a look at the tap, at most one correction."""
SETTING_S = 0.5
READING_S = 0.1
TAP_READINGS = 10
"""Five fresh ones before the captures and five after."""
CAPTURE_S = 0.5
BYTES_A_SECOND = 50e6
"""A record over a local network, so that the instrument and not the wire is the slower."""
BYTES_A_STAY = 40_000
"""Settings, readings and every message of a stay in the logbook."""
_AVERAGING = Term("power_meter", "averaging_time")


def start_s(conditions: Iterable[Condition]) -> float:
    """When the first stay begins: each condition is met at its earliest."""
    return OPENING_S + sum(condition.over_s for condition in conditions)


def stay_s(
    settings: Iterable[Setting],
    swept: Collection[Term],
    readings: int,
    record_bytes: int,
    stop: StopRule,
) -> float:
    """One stay: settings, tap and other readings on both sides, captures; no capture has 0 bytes."""
    averaging_s = next((float(each.value) for each in settings if each.term == _AVERAGING), READING_S)
    steering_s = sum(STEERING_S if term == RECEIVED_POWER else SETTING_S for term in swept)
    tap_s = TAP_READINGS * averaging_s if RECEIVED_POWER in swept else 0.0
    capture_s = stop.captures_per_stay * (CAPTURE_S + record_bytes / BYTES_A_SECOND) if record_bytes else 0.0
    return steering_s + tap_s + 2 * readings * READING_S + capture_s


def capture_bytes(capture: CaptureRequest, bytes_per_sample: int) -> int:
    return len(capture.lanes) * capture.record_length * bytes_per_sample


def night_bytes(stays: int, points: int, capture: CaptureRequest | None, record_bytes: int, stop: StopRule) -> int:
    """The most a night may fill: "doubtful" may keep everything."""
    if capture is None:
        return stays * BYTES_A_STAY
    kept = {"none": 0, "one per point": points}.get(capture.keep, stays * stop.captures_per_stay)
    return stays * BYTES_A_STAY + kept * record_bytes
