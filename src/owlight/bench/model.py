"""The bench as its owner believes it to be. What is true of a simulated one stands in its world file."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Annotated, Literal

from owlight.reader import Within

Loss = Annotated[float, Within(0.0, 100.0)]
Doubt = Annotated[float, Within(0.0, 10.0)]

SIGNAL_INPUT = "receiver signal input"
LO_INPUT = "receiver LO input"
PHOTODIODE = "photodiode"
METER = "power meter"
PLANES = (SIGNAL_INPUT, LO_INPUT, PHOTODIODE, METER)


@dataclass(frozen=True)
class Role:
    """`power_tolerance` and `highest_power` belong to lasers, `floor` to the power meter."""

    driver: str
    resource: str
    serial_number: str
    calibration_due: str = ""
    power_tolerance_db: Doubt | None = None
    highest_power_dbm: float | None = None
    floor_dbm: float | None = None


@dataclass(frozen=True)
class Simulation:
    world: str


@dataclass(frozen=True)
class LightPath:
    """Losses as expected, and the least they could be: only the least protects."""

    transmitter_loss_db: Loss
    transmitter_least_loss_db: Loss
    fixed_pad_db: Loss
    attenuator_insertion_db: Loss
    attenuator_insertion_least_db: Loss
    attenuator_maximum_db: Loss
    tap_to_receiver_loss_db: Loss
    tap_to_receiver_least_loss_db: Loss
    tap_to_meter_loss_db: Loss
    tap_to_meter_least_loss_db: Loss
    lo_loss_db: Loss
    lo_least_loss_db: Loss
    attenuator_accuracy_db: Doubt = 0.0


@dataclass(frozen=True)
class PlaneMinusTap:
    """The one calibrated record that turns a reading of the tap into received power."""

    value_db: Annotated[float, Within(-60.0, 60.0)]
    standard_uncertainty_db: Doubt
    wavelength_nm: float
    wavelength_span_nm: Annotated[float, Within(0.0, 200.0)]
    date: str
    mating: str
    certificate: str
    mating_u_db: Doubt | None = None


@dataclass(frozen=True)
class Meter:
    """Standard uncertainties (k = 1); a certificate that states k = 2 is divided by two before it is written here."""

    certificate_u_db: Doubt
    zero_u_w: Annotated[float, Within(0.0, 1e-3)]
    linearity_u_db: Doubt | None = None
    wavelength_u_db: Doubt | None = None


@dataclass(frozen=True)
class Lane:
    name: Literal["XI", "XQ", "YI", "YQ"]
    channel: Annotated[int, Within(1, 4)]
    skew_s: Annotated[float, Within(-1e-6, 1e-6)] = 0.0
    inverted: bool = False


@dataclass(frozen=True)
class Receiver:
    """Exactly one responsivity. The other figures feed the predicted noise; without them there is no prediction.

    `port_responsivity` is photocurrent of one diode against power at the port, `diode_responsivity` against the power
    that reaches that diode.
    """

    reference_plane: str
    port_responsivity_a_per_w: float | None = None
    diode_responsivity_a_per_w: float | None = None
    thermal_noise_a_per_sqrt_hz: float | None = None
    lo_intensity_noise_db_per_hz: float | None = None
    common_mode_rejection_db: float | None = None
    lane: tuple[Lane, ...] = ()

    @property
    def polarisations(self) -> int:
        return len(self.lane) // 2


@dataclass(frozen=True)
class Limit:
    highest_dbm: float


@dataclass(frozen=True)
class Unattended:
    """Who allows light without a person in the room, who is called, how long at most.

    `accepts_open_attenuator` names who accepts that an attenuator at 0 dB could exceed a limit.
    """

    authorised_by: str
    contact: str
    at_most_s: Annotated[float, Within(1.0, 30 * 86_400.0)]
    accepts_open_attenuator: str = ""


@dataclass(frozen=True)
class Bench:
    bench: str
    format_version: Literal[1]
    role: dict[str, Role]
    light_path: LightPath
    plane_minus_tap: PlaneMinusTap
    meter: Meter
    receiver: Receiver
    limit: dict[str, Limit] = field(default_factory=dict)
    simulation: Simulation | None = None
    unattended: Unattended | None = None
