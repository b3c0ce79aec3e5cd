"""Quantities as people write them, and the number in the unit that a name carries.

A quantity always has its unit; a level (dBm, W) is not a ratio (dB). Spelling is ordinary SI, never that of an
instrument's command language: here `mW` is a milliwatt and `MHz` a megahertz.
"""

from __future__ import annotations

import math
import re

SPEED_OF_LIGHT_M_PER_S = 299_792_458.0  # exact, SI 2019

_PREFIXES = {"f": 1e-15, "p": 1e-12, "n": 1e-9, "u": 1e-6, "µ": 1e-6, "m": 1e-3, "": 1.0, "k": 1e3, "M": 1e6}
_PREFIXES |= {"G": 1e9, "T": 1e12}
_NUMBER = re.compile(r"\s*([+-]?(?:\d[\d_]*\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)\s*(\S.*?)?\s*$")
_BASES = ("A/sqrt(Hz)", "A/W", "V/A", "rad/s", "Hz/h", "W", "Hz", "Bd", "S/s", "s", "m", "V", "A", "b/s")
_WORDS = {
    "dBm": "dBm",
    "dB": "dB",
    "%": "%",
    "deg": "deg",
    "ppm": "ppm",
    "min": "s",
    "h": "s",
    "°": "deg",
    "dB/Hz": "dB/Hz",
    "dB/h": "dB/h",
}
_FACTORS = {"min": 60.0, "h": 3600.0}
_KINDS = {
    "dBm": "a level (dBm or W)",
    "W": "a level (dBm or W)",
    "dB": "a ratio (dB)",
    "nm": "a wavelength or optical frequency (nm or THz)",
    "m": "a length (m)",
    "Hz": "a frequency (Hz) or sample rate (S/s)",
    "Bd": "a symbol rate (Bd)",
    "s": "a time (s, min, h)",
    "V": "a voltage (V)",
    "A": "a current (A)",
    "deg": "an angle (deg)",
    "ppm": "a relative deviation (ppm)",
    "%": "a percentage (%)",
    "A/W": "a responsivity (A/W)",
    "V/A": "a transimpedance (V/A)",
    "A/sqrt(Hz)": "a noise current density (A/sqrt(Hz))",
    "dB/Hz": "a relative intensity noise (dB/Hz)",
    "rad/s": "a rotation rate (rad/s)",
    "dB/h": "a drift (dB/h)",
    "Hz/h": "a drift (Hz/h)",
    "b/s": "a data rate (b/s)",
}


def watts(power_dbm: float) -> float:
    """
    >>> watts(0.0)
    0.001
    """
    return 1e-3 * math.pow(10.0, power_dbm / 10.0)


def dbm(power_w: float) -> float:
    """ValueError at zero or below, where no level exists.

    >>> round(dbm(2e-3), 4)
    3.0103
    """
    if not power_w > 0.0:
        raise ValueError(f"{power_w} W has no level in dBm")
    return 10.0 * math.log10(power_w / 1e-3)


def wavelength_nm(frequency_hz: float) -> float:
    """Vacuum wavelength.

    >>> round(wavelength_nm(193.1e12), 4)
    1552.5244
    """
    return SPEED_OF_LIGHT_M_PER_S / frequency_hz * 1e9


def optical_frequency_hz(vacuum_wavelength_nm: float) -> float:
    """
    >>> round(optical_frequency_hz(1550.0) / 1e12, 6)
    193.414489
    """
    return SPEED_OF_LIGHT_M_PER_S / (vacuum_wavelength_nm * 1e-9)


def kind_of(unit: str) -> str:
    """What a person should write where `unit` is needed.

    >>> kind_of("dB")
    'a ratio (dB)'
    """
    return _KINDS.get(unit, f"a value in {unit}")


def parse(text: str, unit: str) -> float:
    """The number in `unit`, or ValueError whose words say what is allowed.

    >>> parse("-38 dBm", "dBm"), parse("1 mW", "dBm"), parse("32 GBd", "Bd"), parse("5 min", "s")
    (-38.0, 0.0, 32000000000.0, 300.0)
    >>> round(parse("193.1 THz", "nm"), 4)
    1552.5244
    >>> parse("-38 dB", "dBm")
    Traceback (most recent call last):
    ValueError: '-38 dB' is a ratio (dB), but a level (dBm or W) is needed here
    """
    wanted = kind_of(unit)
    match = _NUMBER.match(text)
    if match is None:
        raise ValueError(f"{text!r} is not a quantity; write a number and a unit: {wanted}")
    number, written = float(match[1].replace("_", "")), match[2]
    if written is None:
        raise ValueError(f"{text!r} has no unit; write {wanted}")
    value, base = _to_base(number, written, text, wanted)
    return _convert(value, base, unit, text, wanted)


def _to_base(number: float, written: str, text: str, wanted: str) -> tuple[float, str]:
    if written in _WORDS:
        return number * _FACTORS.get(written, 1.0), _WORDS[written]
    for base in _BASES:
        prefix = written.removesuffix(base)
        if written.endswith(base) and prefix in _PREFIXES:
            # dividing by the inverse keeps 0.2 ms = 0.0002 s free of a rounding in the last digit
            factor = _PREFIXES[prefix]
            value = number * factor if factor >= 1 else number / round(1 / factor)
            return value, {"S/s": "Hz"}.get(base, base)
    raise ValueError(f"{text!r} has an unknown unit {written!r}; write {wanted}")


def _convert(value: float, base: str, unit: str, text: str, wanted: str) -> float:
    if base == unit:
        return value
    if (base, unit) == ("W", "dBm"):
        if value <= 0:
            raise ValueError(f"{text!r} has no level in dBm; write a power above zero")
        return dbm(value)
    if (base, unit) == ("dBm", "W"):
        return watts(value)
    if (base, unit) == ("m", "nm"):
        return value * 1e9
    if (base, unit) == ("Hz", "nm") and value > 0:
        return wavelength_nm(value)
    if (base, unit) == ("%", ""):
        return value / 100.0
    raise ValueError(f"{text!r} is {_KINDS.get(base, base)}, but {wanted} is needed here")


_SI_STEPS = ((1e12, "T"), (1e9, "G"), (1e6, "M"), (1e3, "k"), (1.0, ""), (1e-3, "m"), (1e-6, "µ"), (1e-9, "n"))


def words(value: float, unit: str, digits: int = 6) -> str:
    """The quantity as a person reads it.

    >>> words(32e9, "Bd"), words(-38.0, "dBm"), words(2.5e-5, "W")
    ('32 GBd', '-38 dBm', '25 µW')
    """
    factor, prefix = _scale(abs(value), unit)
    return f"{value / factor:.{digits}g} {prefix}{unit}".strip()


def scattered(value: float, deviation: float, unit: str) -> str:
    """Value and standard deviation in one prefix, to the deviation's second digit (JCGM 100, 7.2.6) or whole units.

    >>> scattered(1.23614e-5, 3.37e-9, "W"), scattered(-2.6e-10, 6.22e-7, "A"), scattered(10.0, 0.0, "dBm")
    ('12.3614 ± 0.0034 µW', '0 ± 622 nA', '10 ± 0 dBm')
    """
    factor, prefix = _scale(max(abs(value), deviation), unit)
    if deviation == 0:
        return f"{value / factor:.6g} ± 0 {prefix}{unit}".strip()
    decimals = max(1 - math.floor(math.log10(deviation / factor)), 0)
    # adding zero makes a plain zero of a negative one
    shown = round(value / factor, decimals) + 0.0
    return f"{shown:.{decimals}f} ± {deviation / factor:.{decimals}f} {prefix}{unit}".strip()


def _scale(size: float, unit: str) -> tuple[float, str]:
    if unit in {"dBm", "dB", "nm", "deg", "ppm", "%", ""} or not math.isfinite(size) or size == 0:
        return 1.0, ""
    return next(((f, p) for f, p in _SI_STEPS if size >= f * (1 - 1e-12)), (1e-12, "p"))


def beside(difference_db: float) -> str:
    """A difference of levels, for what it is held against.

    >>> beside(0.304), beside(-0.304)
    ('0.30 dB above', '0.30 dB below')
    """
    return f"{abs(difference_db):.2f} dB {'below' if difference_db < 0 else 'above'}"
