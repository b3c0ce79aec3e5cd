"""What is true of a simulated bench: one number for each imperfection, and every imperfection can be left out.

Defaults are an ideal bench: no loss, no error, no noise but the shot noise that light cannot be without.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Annotated, Literal

from owlight.reader import Document, Within, nearest, read
from owlight.vocabulary.terms import ROLES

LANES = ("XI", "XQ", "YI", "YQ")

_Ratio = Annotated[float, Within(-120.0, 120.0)]
_Loss = Annotated[float, Within(0.0, 120.0)]
_Span = Annotated[float, Within(0.0, 1e12)]


@dataclass(frozen=True)
class Laser:
    """The light against what the laser's settings say: errors are added to them."""

    linewidth_hz: Annotated[float, Within(0.0, 1e9)] = 0.0
    intensity_noise_db_per_hz: Annotated[float, Within(-250.0, -80.0)] | None = None
    power_error_db: _Ratio = 0.0
    frequency_error_hz: float = 0.0


@dataclass(frozen=True)
class Transmitter:
    """`noise_ceiling_db` is the signal-to-noise ratio of the modulated light itself, per polarisation."""

    loss_db: _Loss = 0.0
    noise_ceiling_db: _Ratio | None = None


@dataclass(frozen=True)
class Path:
    """Fibre, attenuator and tap. `tap_error_db` is what the receiver gets beyond what the losses say."""

    pad_db: _Loss = 0.0
    attenuator_insertion_db: _Loss = 0.0
    attenuator_scale_error: Annotated[float, Within(-0.5, 0.5)] = 0.0
    tap_to_receiver_loss_db: _Loss = 0.0
    tap_to_meter_loss_db: _Loss = 0.0
    tap_error_db: _Ratio = 0.0
    lo_loss_db: _Loss = 0.0
    group_delay_difference_s: Annotated[float, Within(0.0, 1e-9)] = 0.0
    rotation_rad_per_s: float = 0.0


@dataclass(frozen=True)
class Drift:
    """Slow wandering, in standard deviations over a long time; the same in every run of the same `seed`."""

    seed: int = 1
    power_db: _Ratio = 0.0
    frequency_hz: _Span = 0.0
    polarisation_deg: Annotated[float, Within(0.0, 36000.0)] = 0.0
    tap_db: _Ratio = 0.0
    fastest_s: Annotated[float, Within(1.0, 1e9)] = 600.0
    slowest_s: Annotated[float, Within(1.0, 1e9)] = 43_200.0


@dataclass(frozen=True)
class Meter:
    """A reading is the light times scale, plus a zero error, plus noise that averaging shrinks down to a floor.

    `noise_w` is the standard deviation of a reading of one second.
    """

    scale_error_db: _Ratio = 0.0
    zero_error_w: float = 0.0
    noise_w: Annotated[float, Within(0.0, 1.0)] = 0.0
    noise_floor_w: Annotated[float, Within(0.0, 1.0)] = 0.0


@dataclass(frozen=True)
class Lane:
    """One balanced pair and its amplifier; `skew_s` above zero arrives late, `gain_db` counts in volts (20 log10).

    `common_mode_rejection_db` is -20 log10 |R+ - R-| / (R+ + R-); without it the pair is perfect.
    """

    gain_db: _Ratio = 0.0
    skew_s: Annotated[float, Within(-1e-9, 1e-9)] = 0.0
    common_mode_rejection_db: Annotated[float, Within(0.0, 200.0)] | None = None
    offset_v: float = 0.0


@dataclass(frozen=True)
class Receiver:
    """Both hybrids, four balanced pairs, four amplifiers.

    `responsivity_a_per_w` is that of one diode for the light that reaches it. Quadrature errors are beyond 90 degrees.
    Thermal noise is one-sided, at the diodes, before the bandwidth. Without a bandwidth the converter's band decides.
    """

    responsivity_a_per_w: Annotated[float, Within(0.0, 2.0)] = 1.0
    excess_loss_db: _Loss = 0.0
    quadrature_error_x_deg: Annotated[float, Within(-90.0, 90.0)] = 0.0
    quadrature_error_y_deg: Annotated[float, Within(-90.0, 90.0)] = 0.0
    thermal_noise_a_per_sqrt_hz: Annotated[float, Within(0.0, 1e-3)] = 0.0
    bandwidth_hz: Annotated[float, Within(1e6, 1e12)] | None = None
    transimpedance_v_per_a: Annotated[float, Within(0.0, 1e6)] = 1000.0
    automatic_rms_v: Annotated[float, Within(0.0, 10.0)] = 0.05
    photodiode_damage_dbm: Annotated[float, Within(-60.0, 60.0)] = 9.0
    monitor_noise_a: Annotated[float, Within(0.0, 1.0)] = 0.0
    lane: dict[str, Lane] = field(default_factory=dict)

    def lane_of(self, name: str) -> Lane:
        return self.lane.get(name) or Lane()


@dataclass(frozen=True)
class Oscilloscope:
    """`effective_bits` counts all of the converter's noise, its eight bits included."""

    effective_bits: Annotated[float, Within(1.0, 8.0)] | None = None
    clock_error_ppm: Annotated[float, Within(-1e4, 1e4)] = 0.0
    ac_corner_hz: Annotated[float, Within(1.0, 1e9)] = 100e3


@dataclass(frozen=True)
class World:
    """Everything that is true; `instruments` names the file of each role's simulated instrument."""

    world: str = "ideal world"
    format_version: Literal[1] = 1
    instruments: dict[str, str] = field(default_factory=dict)
    serial_numbers: dict[str, str] = field(default_factory=dict)
    signal_laser: Laser = Laser()
    local_oscillator: Laser = Laser()
    transmitter: Transmitter = Transmitter()
    path: Path = Path()
    drift: Drift = Drift()
    meter: Meter = Meter()
    receiver: Receiver = Receiver()
    oscilloscope: Oscilloscope = Oscilloscope()


def read_world(text: str, file: str) -> Document[World]:
    """A world that can be served: every role has an instrument and a serial number of its own."""
    document = read(text, file, World)
    if document.value is None:
        return document
    found = (*_roles(document.value), *_lanes(document.value))
    return document.plus(tuple(document.problem(path, words) for path, words in found))


def _roles(world: World) -> Iterator[tuple[tuple[str, ...], str]]:
    for table in ("instruments", "serial_numbers"):
        named = getattr(world, table)
        for role in named.keys() - ROLES.keys():
            yield (table, role), f"unknown role{nearest(role, ROLES) or ';'} Roles: {', '.join(ROLES)}"
        for role in ROLES.keys() - named.keys():
            yield (table, role), "is missing; the simulated bench serves every role"


def _lanes(world: World) -> Iterator[tuple[tuple[str, ...], str]]:
    for name in world.receiver.lane.keys() - set(LANES):
        yield ("receiver", "lane", name), f"unknown lane; lanes: {', '.join(LANES)}"
    if world.drift.slowest_s <= world.drift.fastest_s:
        yield ("drift", "slowest"), "must be longer than `fastest`"
