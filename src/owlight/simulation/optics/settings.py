"""What the instruments are set to, as far as light, lanes and converter follow it."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class LightSettings:
    """`offsets` and `ranges_v` are those of XI, XQ, YI, YQ; a range is the full scale, peak to peak."""

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
