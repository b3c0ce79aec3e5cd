"""The optical fields that meet in the receiver, in the frame of the local oscillator's phase.

Amplitudes are in square roots of watts, so the square of a field is its power. A phase common to signal and local
oscillator changes no power anywhere, so the local oscillator's field is real and the signal carries both lasers' phase.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from owlight.simulation.optics.drift import drifted
from owlight.simulation.optics.keys import generator
from owlight.simulation.optics.power import beat_frequency_hz, linear, lo_port_power_w, receiver_power_w
from owlight.simulation.optics.settings import LightSettings
from owlight.simulation.optics.transmitter import (
    GUARD_SYMBOLS,
    Complex,
    block_length,
    fraction_of,
    shaped,
    start_of,
    symbols,
    with_noise,
)
from owlight.simulation.world import Laser, World

Real = npt.NDArray[np.float64]

_FARTHEST_BEAT_HZ = 100e9
"""A beat farther out is beyond every lane; it is put here, where no lane follows either."""


@dataclass(frozen=True)
class Instants:
    """Evenly spaced instants; the record begins `lead` of them after the first."""

    count: int
    rate_hz: float
    lead: int

    def times_s(self) -> Real:
        """Seconds from the start of the record."""
        return (np.arange(self.count) - self.lead) / self.rate_hz


@dataclass(frozen=True)
class Fields:
    """Signal in x and y, and the local oscillator of one hybrid, at the receiver's ports."""

    count: int
    signal: tuple[Complex, Complex] | None = None
    local_oscillator: Real | None = None

    def after(self, loss_db: float) -> Fields:
        """The same behind a loss."""
        factor = math.sqrt(linear(-loss_db))
        signal = None if self.signal is None else (factor * self.signal[0], factor * self.signal[1])
        return Fields(self.count, signal, None if self.local_oscillator is None else factor * self.local_oscillator)


def needed_rate_hz(world: World, s: LightSettings, planned_time_s: float) -> float:
    """Twice the bandwidth of the squared field: the signal's own square is twice as wide as the signal."""
    width_hz = (1.0 + s.rolloff) * s.symbol_rate_bd if s.drive_on else 0.0
    return 2.0 * width_hz + 2.0 * abs(_beat_hz(world, s, planned_time_s))


def _beat_hz(world: World, s: LightSettings, planned_time_s: float) -> float:
    beat_hz = beat_frequency_hz(world, s, planned_time_s)
    return max(-_FARTHEST_BEAT_HZ, min(_FARTHEST_BEAT_HZ, beat_hz))


def fields_at(world: World, s: LightSettings, key: int, planned_time_s: float, at: Instants) -> Fields:
    """Both fields at the receiver's ports, with everything that happened to them on the way."""
    signal_w = receiver_power_w(world, s, planned_time_s)
    lo_w = lo_port_power_w(world, s, planned_time_s)
    signal = None
    if signal_w > 0.0:
        amplitude = _amplitude(world.signal_laser, signal_w, at, key, "signal intensity")
        turned = amplitude * _phasor(world, s, key, planned_time_s, at)
        light = modulated(world, s, key, planned_time_s, at) if s.drive_on else _unmodulated(s, at)
        x, y = _rotated(world, planned_time_s, light, at)
        x *= turned
        y *= turned
        signal = (x, y)
    lo = None
    if lo_w > 0.0:
        # the polarisation splitter gives each hybrid half of it
        lo = _amplitude(world.local_oscillator, lo_w / 2.0, at, key, "lo intensity") * np.ones(at.count)
    return Fields(at.count, signal, lo)


def modulated(world: World, s: LightSettings, key: int, planned_time_s: float, at: Instants) -> tuple[Complex, Complex]:
    """The modulated field along the fibre's two principal states, unit total power."""
    per_instant = s.symbol_rate_bd / at.rate_hz
    first_symbol = GUARD_SYMBOLS + fraction_of(key)
    block = symbols(s, start_of(s, key), block_length(at.count, per_instant))
    for polarisation in range(s.polarisations):
        rng = generator(key, f"transmitter {polarisation}")
        block[polarisation] = with_noise(block[polarisation], world.transmitter.noise_ceiling_db, rng)
    block *= math.sqrt(1.0 / s.polarisations)
    block = _launched(world, planned_time_s, block)
    half = world.path.group_delay_difference_s * s.symbol_rate_bd / 2.0
    slow = shaped(block[0], s.rolloff, first_symbol - half, per_instant, at.count)
    fast = shaped(block[1], s.rolloff, first_symbol + half, per_instant, at.count)
    return slow, fast


def _unmodulated(s: LightSettings, at: Instants) -> tuple[Complex, Complex]:
    """Without drive the modulator's bias passes a steady carrier of the same power."""
    share = math.sqrt(1.0 / s.polarisations)
    return np.full(at.count, share + 0j), np.full(at.count, share * (s.polarisations - 1) + 0j)


def _amplitude(laser: Laser, power_w: float, at: Instants, key: int, purpose: str) -> Real | float:
    """Square root of a power that flickers white: one-sided relative intensity noise up to half the rate."""
    if laser.intensity_noise_db_per_hz is None:
        return math.sqrt(power_w)
    deviation = math.sqrt(linear(laser.intensity_noise_db_per_hz) * at.rate_hz / 2.0)
    power = generator(key, purpose).standard_normal(at.count)
    power *= deviation * power_w
    power += power_w
    np.maximum(power, 0.0, out=power)
    return np.sqrt(power, out=power)


def _phasor(world: World, s: LightSettings, key: int, planned_time_s: float, at: Instants) -> Complex:
    """The beat's phase: a uniform start, its frequency, and both lasers' random walks.

    Two independent walks differ by one walk of the summed linewidth; its steps have the variance 2 pi linewidth / rate.
    """
    phase = np.arange(at.count) * (2.0 * np.pi * _beat_hz(world, s, planned_time_s) / at.rate_hz)
    phase += generator(key, "phase start").uniform(0.0, 2.0 * np.pi)
    linewidth_hz = world.signal_laser.linewidth_hz + world.local_oscillator.linewidth_hz
    if linewidth_hz > 0.0:
        steps = generator(key, "phase walk").standard_normal(at.count)
        steps *= math.sqrt(2.0 * np.pi * linewidth_hz / at.rate_hz)
        phase += np.cumsum(steps)
    return _turn(np.asarray(phase, dtype=np.float64))


def _turn(phase: Real) -> Complex:
    """exp(j phase), in less time than the exponential of a complex number takes."""
    found = np.empty(phase.size, dtype=np.complex128)
    np.cos(phase, out=found.real)
    np.sin(phase, out=found.imag)
    return found


def _wander_rad(world: World, angle: str, planned_time_s: float) -> float:
    degrees = drifted(world.drift, f"polarisation {angle}", world.drift.polarisation_deg, planned_time_s)
    return math.radians(degrees)


def _launched(world: World, planned_time_s: float, block: Complex) -> Complex:
    """The transmitter's polarisations as the fibre's principal states see them."""
    angle = _wander_rad(world, "launch", planned_time_s)
    if angle == 0.0:
        return block
    # written out: a linear algebra library may round differently with another number of threads
    cosine, sine = math.cos(angle), math.sin(angle)
    return np.stack([cosine * block[0] - sine * block[1], sine * block[0] + cosine * block[1]])


def _rotated(world: World, planned_time_s: float, light: tuple[Complex, Complex], at: Instants) -> tuple[Complex, ...]:
    """The receiver's axes: birefringence, then an angle that turns evenly within the record."""
    slow, fast = light
    start = _wander_rad(world, "receiver", planned_time_s)
    retardation = np.exp(1j * _wander_rad(world, "retardation", planned_time_s))
    turning = world.path.rotation_rad_per_s
    if start == 0.0 and turning == 0.0:
        return slow, fast * retardation
    angle = start + turning * at.times_s() if turning else np.full(1, start)
    cosine, sine = np.cos(angle), np.sin(angle)
    fast = fast * retardation
    return cosine * slow - sine * fast, sine * slow + cosine * fast
