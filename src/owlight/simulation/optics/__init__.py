"""Light from lasers to codes, in fields: pure functions of (world, settings, key, planned time)."""

from owlight.simulation.optics.capture import capture_codes
from owlight.simulation.optics.power import (
    damaged_by,
    diode_peak_power_w,
    lo_port_power_w,
    meter_power_w,
    photocurrent_a,
    receiver_power_w,
)
from owlight.simulation.optics.settings import LightSettings

__all__ = [
    "LightSettings",
    "capture_codes",
    "damaged_by",
    "diode_peak_power_w",
    "lo_port_power_w",
    "meter_power_w",
    "photocurrent_a",
    "receiver_power_w",
]
