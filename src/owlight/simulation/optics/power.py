"""Levels along the light path: how much light is where, and what the power meter and the receiver's monitor say."""

from __future__ import annotations

import math
from dataclasses import replace

from owlight.quantity import optical_frequency_hz, watts
from owlight.simulation.optics.drift import drifted
from owlight.simulation.optics.keys import generator
from owlight.simulation.optics.settings import LightSettings
from owlight.simulation.world import LANES, Drift, World


def linear(level_db: float) -> float:
    """The power ratio of so many decibels."""
    return math.pow(10.0, level_db / 10.0)


def _tap_power_w(world: World, s: LightSettings, planned_time_s: float) -> float:
    """Light that enters the tap."""
    if not s.signal_on:
        return 0.0
    path = world.path
    attenuation_db = s.attenuation_db * (1.0 + path.attenuator_scale_error)
    loss_db = world.transmitter.loss_db + path.pad_db + path.attenuator_insertion_db + attenuation_db
    wander_db = drifted(world.drift, "signal power", world.drift.power_db, planned_time_s)
    return watts(s.signal_power_dbm + world.signal_laser.power_error_db + wander_db - loss_db)


def receiver_power_w(world: World, s: LightSettings, planned_time_s: float) -> float:
    """True total signal power at the receiver's input, local oscillator excluded."""
    wander_db = drifted(world.drift, "tap", world.drift.tap_db, planned_time_s)
    gain_db = world.path.tap_error_db + wander_db - world.path.tap_to_receiver_loss_db
    return _tap_power_w(world, s, planned_time_s) * linear(gain_db)


def meter_power_w(world: World, s: LightSettings, key: int, planned_time_s: float, averaging_s: float) -> float:
    """One reading of the power meter; in the dark it can be negative."""
    meter = world.meter
    gain_db = meter.scale_error_db - world.path.tap_to_meter_loss_db
    seen_w = _tap_power_w(world, s, planned_time_s) * linear(gain_db)
    noise_w = math.hypot(meter.noise_w / math.sqrt(averaging_s), meter.noise_floor_w)
    return seen_w + meter.zero_error_w + noise_w * float(generator(key, "meter").standard_normal())


def lo_port_power_w(world: World, s: LightSettings, planned_time_s: float | None = None) -> float:
    """True power at the receiver's LO port; without a time it does not drift."""
    if not s.lo_on:
        return 0.0
    wander_db = 0.0
    if planned_time_s is not None:
        wander_db = drifted(world.drift, "lo power", world.drift.power_db, planned_time_s)
    return watts(s.lo_power_dbm + world.local_oscillator.power_error_db + wander_db - world.path.lo_loss_db)


def diode_peak_power_w(world: World, s: LightSettings) -> float:
    """The most that one photodiode could see: all signal in one polarisation, at the crest of the beat."""
    signal_w = receiver_power_w(replace(world, drift=Drift()), s, 0.0)
    lo_w = lo_port_power_w(world, s)
    passed = linear(-world.receiver.excess_loss_db)
    # each hybrid spreads an input over four diodes; the local oscillator is split over two hybrids first
    return passed * (math.sqrt(signal_w / 4.0) + math.sqrt(lo_w / 8.0)) ** 2


def damaged_by(world: World, peak_w: float) -> frozenset[str]:
    """Lanes of which a photodiode does not survive this much light."""
    return frozenset(LANES) if peak_w > watts(world.receiver.photodiode_damage_dbm) else frozenset()


def photocurrent_a(world: World, s: LightSettings, key: int, planned_time_s: float) -> float:
    """The receiver's monitor: the sum of all photodiode currents, as far as they are biased."""
    noise_a = world.receiver.monitor_noise_a * float(generator(key, "photocurrent").standard_normal())
    if not s.bias:
        return noise_a
    light_w = receiver_power_w(world, s, planned_time_s) + lo_port_power_w(world, s, planned_time_s)
    passed = linear(-world.receiver.excess_loss_db)
    return world.receiver.responsivity_a_per_w * passed * light_w + noise_a


def beat_frequency_hz(world: World, s: LightSettings, planned_time_s: float) -> float:
    """Optical frequency of the signal less that of the local oscillator."""
    set_hz = optical_frequency_hz(s.signal_wavelength_nm) - optical_frequency_hz(s.lo_wavelength_nm)
    true_hz = world.signal_laser.frequency_error_hz - world.local_oscillator.frequency_error_hz
    # two lasers of the same wander: their difference wanders by the root of two
    wander_hz = math.sqrt(2.0) * drifted(world.drift, "frequency", world.drift.frequency_hz, planned_time_s)
    return set_hz + true_hz + wander_hz
