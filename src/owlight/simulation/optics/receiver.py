"""Hybrids, photodiodes and balanced subtraction: fields in, currents out.

Each coupler gives the sum and the difference of what enters it; each photodiode gives the square of the field.
K. Kikuchi, "Fundamentals of coherent optical fiber communications", Journal of Lightwave Technology 34(1), 157, 2016.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from owlight.simulation.optics.fields import Fields, Real
from owlight.simulation.world import Lane, Receiver

Complex = npt.NDArray[np.complex128]

ELECTRON_C = 1.602_176_634e-19  # exact, SI 2019


@dataclass(frozen=True)
class Pair:
    """Mean photocurrents of a lane's two diodes, before any noise of their own."""

    plus_a: Real
    minus_a: Real


def responsivities(receiver: Receiver, lane: Lane) -> tuple[float, float]:
    """A/W of the two diodes: their mean is the stated one, their difference over their sum the rejection."""
    if lane.common_mode_rejection_db is None:
        return receiver.responsivity_a_per_w, receiver.responsivity_a_per_w
    unlike = math.pow(10.0, -lane.common_mode_rejection_db / 20.0)
    return receiver.responsivity_a_per_w * (1.0 + unlike), receiver.responsivity_a_per_w * (1.0 - unlike)


def pair_of(
    signal: Complex | None, lo: Real | None, lo_phase_rad: float, ampere_per_watt: tuple[float, float], count: int
) -> Pair:
    """One branch of a hybrid: half of each field's amplitude to each output, the local oscillator turned by a phase."""
    s = 0.5 * signal if signal is not None else np.zeros(count, dtype=np.complex128)
    real, imaginary = (lo * (0.5 * part) if lo is not None else 0.0 for part in _parts(lo_phase_rad))
    plus_w = (s.real + real) ** 2 + (s.imag + imaginary) ** 2
    minus_w = (s.real - real) ** 2 + (s.imag - imaginary) ** 2
    plus_w *= ampere_per_watt[0]
    minus_w *= ampere_per_watt[1]
    return Pair(plus_w, minus_w)


def _parts(angle_rad: float) -> tuple[float, float]:
    return math.cos(angle_rad), math.sin(angle_rad)


def lane_pair(receiver: Receiver, fields: Fields, name: str, damaged: bool) -> Pair:
    """The two diodes of a lane, lit by the fields inside the receiver; one of a damaged lane gives nothing."""
    axis = 0 if name.startswith("X") else 1
    signal = None if fields.signal is None else fields.signal[axis]
    error_deg = receiver.quadrature_error_x_deg if axis == 0 else receiver.quadrature_error_y_deg
    angle_rad = math.radians(90.0 + error_deg) if name.endswith("Q") else 0.0
    plus, minus = responsivities(receiver, receiver.lane_of(name))
    return pair_of(signal, fields.local_oscillator, angle_rad, (0.0 if damaged else plus, minus), fields.count)


def balanced_a(receiver: Receiver, pair: Pair, rng: np.random.Generator, rate_hz: float) -> Real:
    """Difference of the two currents with their noise.

    Each diode's shot noise has the variance q I rate; that of their difference is the sum, so one draw serves both.
    """
    variance = pair.plus_a + pair.minus_a
    variance *= ELECTRON_C * rate_hz
    variance += receiver.thermal_noise_a_per_sqrt_hz**2 * rate_hz / 2.0
    noise = rng.standard_normal(variance.size)
    noise *= np.sqrt(variance, out=variance)
    noise += pair.plus_a
    noise -= pair.minus_a
    return noise
