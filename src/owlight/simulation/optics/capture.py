"""One record of the four lanes: a pure function of world, settings, key and planned time."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt
from scipy.fft import next_fast_len

from owlight.simulation.optics.digitiser import quantised, sampled
from owlight.simulation.optics.fields import Fields, Instants, Real, fields_at, needed_rate_hz
from owlight.simulation.optics.keys import generator
from owlight.simulation.optics.receiver import Pair, balanced_a, lane_pair
from owlight.simulation.optics.settings import LightSettings
from owlight.simulation.world import LANES, World

Codes = npt.NDArray[np.int8]

_LEAD_SAMPLES = 256
"""Samples before and after the record, so that the ends of the filtered block stay outside it."""
_MOST_INSTANTS = 1 << 25
"""A few gigabytes of fields; only a record far too slow for its light needs more."""


def capture_codes(
    world: World, s: LightSettings, key: int, planned_time_s: float, damaged: frozenset[str] = frozenset()
) -> tuple[Codes, ...]:
    """Codes of XI, XQ, YI, YQ, `record_length` each; the same arguments give the same bytes.

    `damaged` names lanes of which a photodiode gives nothing any more.
    """
    volts = lane_volts(world, s, key, planned_time_s, damaged)
    return tuple(
        quantised(lane, range_v, world.oscilloscope, generator(key, f"converter {name}"))
        for name, lane, range_v in zip(LANES, volts, s.ranges_v, strict=True)
    )


def instants_of(world: World, s: LightSettings, planned_time_s: float) -> tuple[Instants, int]:
    """The instants at which fields are computed, and how many of them there are to a sample.

    Time is the signal's; the converter's clock runs fast or slow against it.
    """
    sample_rate_hz = s.sample_rate_hz * (1.0 + 1e-6 * world.oscilloscope.clock_error_ppm)
    every = max(1, math.ceil(needed_rate_hz(world, s, planned_time_s) / sample_rate_hz - 1e-9))
    if every * s.record_length > _MOST_INSTANTS:
        raise ValueError(
            f"{s.record_length} samples at {s.sample_rate_hz:g} a second need {every} instants of light each, "
            f"{_MOST_INSTANTS} at most in all; take a shorter record or more samples a second"
        )
    samples = next_fast_len(s.record_length + 2 * _LEAD_SAMPLES, real=True)
    return Instants(samples * every, sample_rate_hz * every, _LEAD_SAMPLES * every), every


def lane_volts(
    world: World, s: LightSettings, key: int, planned_time_s: float, damaged: frozenset[str] = frozenset()
) -> tuple[Real, ...]:
    """Voltages at the converter's inputs at the moments of sampling."""
    at, every = instants_of(world, s, planned_time_s)
    fields = fields_at(world, s, key, planned_time_s, at).after(world.receiver.excess_loss_db)
    found = []
    for name in LANES:
        lane = world.receiver.lane_of(name)
        pair = lane_pair(world.receiver, fields, name, name in damaged) if s.bias else _without_bias(fields)
        current_a = balanced_a(world.receiver, pair, generator(key, f"lane {name}"), at.rate_hz)
        corner_hz = world.oscilloscope.ac_corner_hz if s.coupling == "AC" else None
        seen_a = sampled(current_a, at.rate_hz, every, world.receiver.bandwidth_hz, lane.skew_s, corner_hz)
        seen_a = seen_a[_LEAD_SAMPLES : _LEAD_SAMPLES + s.record_length]
        seen_a *= _gain_v_per_a(world, s, seen_a, lane.gain_db)
        seen_a += lane.offset_v
        found.append(seen_a)
    return tuple(found)


def _without_bias(fields: Fields) -> Pair:
    """A photodiode without bias is far too slow for any of this."""
    return Pair(np.zeros(fields.count), np.zeros(fields.count))


def _gain_v_per_a(world: World, s: LightSettings, current_a: Real, lane_gain_db: float) -> float:
    """Set by hand, or such that each lane's swing has the receiver's own standard deviation."""
    if s.gain_control == "automatic":
        deviation = float(np.std(current_a))
        return world.receiver.automatic_rms_v / deviation if deviation > 0.0 else 0.0
    return world.receiver.transimpedance_v_per_a * math.pow(10.0, (s.gain_db + lane_gain_db) / 20.0)
