"""Parameters into values and values into answers: suffixes with multipliers, keywords, NR1 and NR3, 9.91E37.

Units and multipliers: IEEE 488.2 clause 7.7.3 and SCPI-99 volume 1, 7.2. M means milli, except before HZ and OHM,
where it means mega; MA is mega everywhere: MW is a milliwatt, MAW a megawatt.
"""

from __future__ import annotations

import math
from collections.abc import Iterable

from owlight.simulation.device.errors import DeviceError
from owlight.simulation.device.message import Parameter

NOT_A_NUMBER = 9.91e37
_INFINITY = 9.9e37
_MULTIPLIERS = {"EX": 1e18, "PE": 1e15, "T": 1e12, "G": 1e9, "MA": 1e6, "K": 1e3, "M": 1e-3, "U": 1e-6, "N": 1e-9}
_MULTIPLIERS |= {"P": 1e-12, "F": 1e-15, "A": 1e-18}
_LINEAR = ("W", "HZ", "V", "S", "M", "A", "OHM", "BD")
_LEVELS = {"DBM": 0.0, "DBMW": 0.0, "DBW": 30.0, "DBUW": -30.0, "DBNW": -60.0}
_SCALED = {"NM": ("M", 1e-9), "GHZ": ("HZ", 1e9), "THZ": ("HZ", 1e12)}  # spoken bare in a multiple
_MOST_DIGITS = 255
_LARGEST_EXPONENT = 32000


def number(parameter: Parameter) -> float:
    """A bare number; -123, -124 or -128 otherwise."""
    if parameter.suffix:
        raise DeviceError(-138, parameter.suffix)
    return _mantissa(parameter)


def _mantissa(parameter: Parameter) -> float:
    if parameter.kind not in ("number", "nondecimal"):
        raise DeviceError(-104, parameter.text[:20])
    mantissa, _, exponent = parameter.text.upper().partition("E")
    if len(mantissa.strip("+-0.")) > _MOST_DIGITS:
        raise DeviceError(-124)
    if exponent and (len(exponent) > 7 or abs(int(exponent)) > _LARGEST_EXPONENT):
        raise DeviceError(-123, exponent)
    return float(parameter.text)


def in_unit(parameter: Parameter, unit: str, suffixes: bool) -> float:
    """The number in `unit`, the one that a bare number has; -131 for a suffix of another kind, -138 where none may be.

    >>> in_unit(Parameter("number", "2", "MW"), "W", True), in_unit(Parameter("number", "2", "MAW"), "W", True)
    (0.002, 2000000.0)
    >>> in_unit(Parameter("number", "2", "MHZ"), "HZ", True), in_unit(Parameter("number", "1", "MW"), "DBM", True)
    (2000000.0, 0.0)
    """
    value = _mantissa(parameter)
    if not parameter.suffix:
        return value
    if not suffixes or not unit or parameter.kind == "nondecimal":
        raise DeviceError(-138, parameter.suffix)
    if len(parameter.suffix) > 12:
        raise DeviceError(-134, parameter.suffix)
    return _with_suffix(value, parameter.suffix, unit)


def _with_suffix(value: float, suffix: str, unit: str) -> float:
    if unit == "DB" and suffix == "DB":
        return value
    if unit in ("DBM", "W") and suffix in _LEVELS:
        level_dbm = value + _LEVELS[suffix]
        return level_dbm if unit == "DBM" else 1e-3 * 10 ** (level_dbm / 10)
    base, spoken = _SCALED.get(unit, ("W" if unit == "DBM" else unit, 1.0))
    if base not in _LINEAR or not suffix.endswith(base):
        raise DeviceError(-131, suffix)
    factor = multiplier(suffix.removesuffix(base), base) / spoken
    # dividing by the inverse keeps 1550.12 NM the same number as 1.55012E-6
    scaled = value * factor if factor >= 1 else value / round(1 / factor)
    if unit != "DBM":
        return scaled
    if scaled <= 0:
        raise DeviceError(-222, "no level in DBM")
    return 10 * math.log10(scaled / 1e-3)


def multiplier(prefix: str, base: str) -> float:
    """
    >>> multiplier("M", "HZ"), multiplier("M", "W"), multiplier("MA", "HZ")
    (1000000.0, 0.001, 1000000.0)
    """
    if not prefix:
        return 1.0
    if prefix == "M" and base in ("HZ", "OHM"):
        return 1e6
    if prefix not in _MULTIPLIERS:
        raise DeviceError(-131, prefix + base)
    return _MULTIPLIERS[prefix]


def boolean(parameter: Parameter) -> bool:
    """ON, OFF, or a number, which is rounded: anything but 0 is on (SCPI-99 volume 1, 7.3)."""
    if parameter.kind == "word":
        if parameter.text not in ("ON", "OFF"):
            raise DeviceError(-224, parameter.text)
        return parameter.text == "ON"
    return round(number(parameter)) != 0


def integer(parameter: Parameter, low: int, high: int) -> int:
    """A number rounded to a whole one, refused outside its bounds."""
    value = number(parameter)
    if not low <= value <= high:
        raise DeviceError(-222, parameter.text)
    return round(value)


def short_form(mnemonic: str) -> str:
    """
    >>> short_form("AUTomatic"), short_form("QPSK")
    ('AUT', 'QPSK')
    """
    return "".join(character for character in mnemonic if not character.islower())


def choice(parameter: Parameter, mnemonics: Iterable[str]) -> str:
    """The mnemonic, as the tree spells it, whose long or short form was sent; -224 otherwise."""
    if parameter.kind != "word":
        raise DeviceError(-104 if parameter.kind == "string" else -128, parameter.text[:20])
    for mnemonic in mnemonics:
        if parameter.text in (mnemonic.upper(), short_form(mnemonic)):
            return mnemonic
    raise DeviceError(-224, parameter.text)


def nr3(value: float) -> str:
    """The number with an exponent; not-a-number and the infinities as SCPI-99 volume 1, 7.2.1 has them.

    >>> nr3(1.55012e-6), nr3(math.nan), nr3(-math.inf)
    ('1.55012000000E-06', '9.91E37', '-9.9E37')
    """
    if math.isnan(value):
        return "9.91E37"
    if math.isinf(value):
        return "9.9E37" if value > 0 else "-9.9E37"
    return f"{value:.11E}"


def nr2(value: float) -> str:
    """A plain decimal number, as some instruments answer everything.

    >>> nr2(1550.12), nr2(-3.0)
    ('1550.120000', '-3.000000')
    """
    return f"{value:.6f}" if math.isfinite(value) else nr3(value)


def block(data: bytes) -> bytes:
    """A definite-length block (IEEE 488.2 clause 8.7.9).

    >>> block(b"hello")
    b'#15hello'
    """
    length = str(len(data))
    return b"#" + str(len(length)).encode() + length.encode() + data


def level_dbm(power_w: float) -> float:
    """Not-a-number in the dark, where a meter may read zero or less.

    >>> level_dbm(1e-3), level_dbm(-1e-12)
    (0.0, nan)
    """
    return 10 * math.log10(power_w / 1e-3) if power_w > 0 else math.nan
