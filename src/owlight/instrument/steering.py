"""From a received power to an attenuation: small steps, always from the dark, with the tap watching."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from owlight.bench import attenuation_for, received_power_dbm, worst_case
from owlight.bench.model import METER as METER_PLANE
from owlight.errors import BenchError, InstrumentError
from owlight.instrument.light_keeper import ATTENUATION, SIGNAL_OUTPUT, SIGNAL_POWER
from owlight.instrument.lighting import METER, wait_averaged
from owlight.quantity import dbm, watts, words
from owlight.vocabulary.values import Applied

if TYPE_CHECKING:
    from owlight.instrument.open_bench import OpenBench

LARGEST_STEP_DB = 3.0
_FROM_THE_DARK_DB = 1.0
"""Overshoot before a final approach, more than the backlash of an attenuator's drive (common practice)."""
_WORTH_CORRECTING_DB = 0.03
_DOUBT_OF_READING_DB = 0.5
_LEAST_SHARE_DB = 10.0
"""A tap this much below expectation means that the light does not arrive, not that a loss is a little off."""


@dataclass(frozen=True)
class ReceivedPowerSet:
    attenuation_set_db: float
    attenuation_read_db: float


def set_received_power(bench: OpenBench, received_dbm: float) -> ReceivedPowerSet:
    """Steer by the paper, look at the tap a full averaging window later, correct at most once."""
    signal_dbm = _signal_dbm(bench)
    still_there(bench)
    commanded_db = _within(bench, attenuation_for(bench.paper, received_dbm, signal_dbm), received_dbm)
    tap_w = _move(bench, commanded_db, signal_dbm)
    if tap_w is None:  # nothing moved
        tap_w = _look(bench, signal_dbm)
    if tap_w > _least_trusted_w(bench):
        error_db = received_power_dbm(bench.paper, tap_w) - received_dbm
        if abs(error_db) > _WORTH_CORRECTING_DB:
            commanded_db = _within(bench, commanded_db + error_db, received_dbm)
            _move(bench, commanded_db, signal_dbm)
    return ReceivedPowerSet(commanded_db, _attenuation_db(bench))


def approach(bench: OpenBench, attenuation_db: float, point: int | None = None) -> Applied:
    """A bare attenuation that lets more light through: the same small steps, the same looks at the tap."""
    bench.judge(ATTENUATION, attenuation_db, point)  # the end of the way, before its first step
    if bench.light.attenuation_db is None:
        bench.set_at_once(ATTENUATION, bench.paper.light_path.attenuator_maximum_db)
    still_there(bench)
    signal_dbm = _signal_dbm(bench)
    return _climb(bench, _attenuation_db(bench), attenuation_db, signal_dbm, point)[0]


def close_attenuator(bench: OpenBench) -> None:
    """At its maximum and read back there, before a source gives more."""
    if not bench.knows(ATTENUATION):
        return
    if bench.light.attenuation_db is not None and bench.light.signal_on is not False:
        still_there(bench)
    maximum_db = bench.paper.light_path.attenuator_maximum_db
    found_db = bench.read_setting(ATTENUATION)
    if not isinstance(found_db, float) or found_db < maximum_db - bench.tolerance_of(ATTENUATION) - 1e-9:
        bench.set_at_once(ATTENUATION, maximum_db)


def _signal_dbm(bench: OpenBench) -> float:
    on, power_dbm = bench.read_setting(SIGNAL_OUTPUT), bench.read_setting(SIGNAL_POWER)
    if on is not True or not isinstance(power_dbm, float):
        raise BenchError(
            "The signal laser does not confirm that it is on at a known power, so nothing can be expected at the "
            "tap. Nothing was moved; light up first."
        )
    return power_dbm


def still_there(bench: OpenBench) -> None:
    """An attenuator that lost its power may stand open: believe the read-back, and stop where it contradicts."""
    believed_db = bench.light.attenuation_db
    found_db = bench.read_setting(ATTENUATION)
    tolerance_db = bench.tolerance_of(ATTENUATION)
    if believed_db is None or not isinstance(found_db, float) or abs(found_db - believed_db) > tolerance_db + 1e-9:
        bench.distrust_attenuator()
        raise InstrumentError(
            f"The attenuator reads back {found_db} dB where it was left at {believed_db} dB. "
            "The bench is made safe; look whether it lost its power or somebody touched it.",
            "attenuator",
        )


def _within(bench: OpenBench, attenuation_db: float, received_dbm: float) -> float:
    highest_db = bench.paper.light_path.attenuator_maximum_db
    if not -1e-9 <= attenuation_db <= highest_db + 1e-9:
        raise BenchError(
            f"{words(received_dbm, 'dBm')} would need an attenuation of {attenuation_db:.2f} dB, outside 0 to "
            f"{highest_db:g} dB. Nothing was moved; choose another power, or another loss in the path."
        )
    return min(max(round(attenuation_db, 3), 0.0), highest_db)


def _attenuation_db(bench: OpenBench) -> float:
    found = bench.light.attenuation_db
    assert found is not None  # set_at_once() and still_there() have just proven it
    return found


def _move(bench: OpenBench, target_db: float, signal_dbm: float) -> float | None:
    """The tap's reading after the last step, None if it stood there already."""
    start_db = _attenuation_db(bench)
    if abs(start_db - target_db) <= bench.tolerance_of(ATTENUATION) / 2:
        return None
    if target_db > start_db:
        start_db = min(target_db + _FROM_THE_DARK_DB, bench.paper.light_path.attenuator_maximum_db)
        bench.set_at_once(ATTENUATION, start_db)
        if start_db == target_db:
            return _look(bench, signal_dbm)
    return _climb(bench, start_db, target_db, signal_dbm)[1]


def _climb(
    bench: OpenBench, start_db: float, target_db: float, signal_dbm: float, point: int | None = None
) -> tuple[Applied, float]:
    """Towards light, with the tap's reading after the last step."""
    steps = max(1, math.ceil((start_db - target_db) / LARGEST_STEP_DB - 1e-9))
    for number in range(1, steps):
        bench.set_at_once(ATTENUATION, round(start_db + number / steps * (target_db - start_db), 3), point)
        _look(bench, signal_dbm)
    return bench.set_at_once(ATTENUATION, target_db, point), _look(bench, signal_dbm)


def _look(bench: OpenBench, signal_dbm: float) -> float:
    """A fresh reading of the tap, held against what is expected and against the worst case."""
    wait_averaged(bench)
    tap_w = bench.read(METER, phase="steering").value
    if tap_w is None:
        raise InstrumentError("The power meter reads no number. The bench is made safe; look at it.", "power_meter")
    expected_dbm = _expected_tap_dbm(bench, signal_dbm)
    highest_dbm = next(p.power_dbm for p in worst_case(bench.paper, bench.light) if p.plane == METER_PLANE)
    if tap_w > watts(highest_dbm + _DOUBT_OF_READING_DB) + _least_trusted_w(bench):
        raise InstrumentError(
            f"The tap reads {words(dbm(tap_w), 'dBm', 4)}, more than the bench file allows for in the worst case "
            f"({words(highest_dbm, 'dBm', 4)}). The bench is made safe; its losses or limits are not what they seem.",
            "power_meter",
        )
    least_w = watts(expected_dbm - _LEAST_SHARE_DB)
    if least_w > _least_trusted_w(bench) and tap_w < least_w:
        raise InstrumentError(
            f"The tap reads {words(tap_w, 'W', 3)} where about {words(watts(expected_dbm), 'W', 3)} is expected. "
            "The bench is made safe; look for a connector, a shutter or a modulator without drive.",
            "power_meter",
        )
    return tap_w


def _expected_tap_dbm(bench: OpenBench, signal_dbm: float) -> float:
    received_dbm = attenuation_for(bench.paper, 0.0, signal_dbm) - _attenuation_db(bench)
    return received_dbm - bench.paper.plane_minus_tap.value_db


def _least_trusted_w(bench: OpenBench) -> float:
    """Ten times the meter's floor: below it a reading says nothing about the light."""
    floor_dbm = bench.paper.role["power_meter"].floor_dbm
    return 0.0 if floor_dbm is None else 10.0 * watts(floor_dbm)
