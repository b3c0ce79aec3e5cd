"""Temporary: levels only, until the optics in fields are here."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class LightSettings:
    signal_on: bool
    signal_power_dbm: float
    signal_wavelength_nm: float
    lo_on: bool
    lo_power_dbm: float
    lo_wavelength_nm: float
    attenuation_db: float
    drive_on: bool
    modulation: str
    symbol_rate_bd: float
    polarisations: int
    rolloff: float
    pattern_order: int
    offsets: tuple[int, ...]
    sample_rate_hz: float
    record_length: int
    ranges_v: tuple[float, ...]
    coupling: str
    bias: bool
    gain_db: float
    gain_control: str


def _w(dbm):
    return 10 ** (dbm / 10) * 1e-3


class StandIn:
    def receiver_power_w(self, s, planned_time_s):
        return _w(s.signal_power_dbm - 12 - 1.5 - s.attenuation_db - 10.1) if s.signal_on else 0.0

    def meter_power_w(self, s, key, planned_time_s, averaging_s):
        rng = np.random.default_rng(key)
        noise = rng.normal(0, 1e-12)
        return self.receiver_power_w(s, 0) * 10**0.954 * (1 + rng.normal(0, 1e-4)) + noise

    def diode_peak_power_w(self, s):
        lo = _w(s.lo_power_dbm - 1) if s.lo_on else 0.0
        return (lo**0.5 + self.receiver_power_w(s, 0) ** 0.5) ** 2 / 4

    def damaged_by(self, peak_w):
        return frozenset(("XI", "XQ", "YI", "YQ")) if peak_w > _w(9) else frozenset()

    def photocurrent_a(self, s, key, planned_time_s):
        return (self.receiver_power_w(s, 0) + (_w(s.lo_power_dbm - 1) if s.lo_on else 0)) * s.bias

    def capture_codes(self, s, key, planned_time_s, damaged):
        rng = np.random.default_rng(key)
        return tuple(
            np.clip(np.round(rng.normal(0, 0.02, s.record_length) / r * 256), -128, 127).astype(np.int8)
            for r in s.ranges_v
        )
