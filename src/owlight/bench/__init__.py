"""The bench on paper: roles, light path, power at planes, damage limits, calibration, what safe means."""

from owlight.bench.calibration import common_uncertainty, lowest_received_power_dbm, received_power_dbm
from owlight.bench.light import (
    LightState,
    as_it_shines,
    attenuation_for,
    fixed_pad_words,
    lo_laser_power_dbm,
    refuse_if_over,
    safe_settings,
    worst_case,
)
from owlight.bench.model import Bench, Lane, Role
from owlight.bench.reading import read_bench

__all__ = [
    "Bench",
    "Lane",
    "LightState",
    "Role",
    "as_it_shines",
    "attenuation_for",
    "common_uncertainty",
    "fixed_pad_words",
    "lo_laser_power_dbm",
    "lowest_received_power_dbm",
    "read_bench",
    "received_power_dbm",
    "refuse_if_over",
    "safe_settings",
    "worst_case",
]
