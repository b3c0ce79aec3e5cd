"""Between values in the units of terms and the words an instrument speaks."""

from __future__ import annotations

import math

from owlight import quantity
from owlight.driver.model import Driver, Reading, Setting
from owlight.scpi import matches, parse_boolean, parse_number, parse_string, short_form, write_number
from owlight.vocabulary.terms import TERMS
from owlight.vocabulary.values import Term, Value

_SCALES = {"mW": ("W", 1e-3), "nm": ("m", 1e-9), "GHz": ("Hz", 1e9), "THz": ("Hz", 1e12), "ms": ("s", 1e-3)}
_TRUE_FALSE = {True: "true", False: "false"}
CONVERTIBLE = {
    "dBm": {"dBm", "W"},
    "W": {"W", "dBm"},
    "dB": {"dB"},
    "nm": {"m", "Hz"},
    "Hz": {"Hz", "s"},
    "Bd": {"Bd", "Hz"},
    "s": {"s"},
    "V": {"V"},
    "A": {"A"},
    "": {""},
}
"""Which units can be spoken for a term; a sample rate may be spoken as the interval between samples."""


def program_message(driver: Driver, term: Term, value: Value) -> str:
    """The program message that sets a term.

    The value is in the unit that TERMS names. KeyError where the driver has no such setting, ValueError where the
    instrument has no word for the value.
    """
    setting = driver.setting[term.name]
    return setting.command.replace("{value}", spoken(setting, term, value))


def query(driver: Driver, term: Term) -> str:
    """The query of a setting or reading; KeyError where there is none."""
    if term.name in driver.setting:
        return driver.setting[term.name].query
    return driver.reading[term.name].query


def spoken(setting: Setting, term: Term, value: Value) -> str:
    """The value as the instrument wants to hear it."""
    kind = TERMS[term].type
    if kind is bool:
        word = setting.words.get(_TRUE_FALSE[bool(value)])
        return short_form(word) if word else ("1" if value else "0")
    if kind is str:
        if setting.words and str(value) not in setting.words:
            raise ValueError(f"{value!r} is not known to the instrument; allowed: {', '.join(setting.words)}")
        return short_form(setting.words.get(str(value), str(value)))
    if kind is int:
        return write_number(int(value))
    number = _to_spoken(float(value), TERMS[term].unit, setting.speaks) * setting.factor
    return write_number(float(f"{number:.15g}")) + setting.suffix


def spoken_tolerance(driver: Driver, term: Term, value: float) -> float | None:
    """How far the number that the instrument answers may lie from the one it was sent, in the unit it speaks.

    The smaller side counts where the unit is not linear: 0.02 dB of a milliwatt are 4.6 microwatts.
    """
    tolerance = driver.tolerance_of(term)
    if tolerance is None:
        return None
    setting, unit = driver.setting[term.name], TERMS[term].unit
    sent, above, below = (
        _to_spoken(number, unit, setting.speaks) * setting.factor
        for number in (value, value + tolerance, value - tolerance)
    )
    return min(abs(above - sent), abs(below - sent))


def value_of(driver: Driver, term: Term, response: str) -> Value | None:
    """The value of a response in the unit of the term; None where the instrument said not-a-number.

    ValueError where the response is not what the driver file says.
    """
    setting = driver.setting.get(term.name)
    kind = TERMS[term].type
    if setting is not None and kind is bool:
        return _boolean(setting, response)
    if setting is not None and kind is str:
        return _word(setting, response)
    number = parse_number(response)
    if number is None:
        return None
    if kind is int:
        if not math.isfinite(number):
            raise ValueError(f"{response!r} is not a whole number")
        return round(number)
    speaker: Setting | Reading = setting if setting is not None else driver.reading[term.name]
    if not math.isfinite(number):
        return number
    return _from_spoken(number / speaker.factor, TERMS[term].unit, speaker.speaks)


def _boolean(setting: Setting, response: str) -> bool:
    for name, word in setting.words.items():
        if matches(word, response):
            return name == "true"
    return parse_boolean(response)


def _word(setting: Setting, response: str) -> str:
    answered = parse_string(response)
    return next((name for name, word in setting.words.items() if matches(word, answered)), answered)


def base_of(speaks: str) -> tuple[str, float]:
    """
    >>> base_of("THz"), base_of("V")
    (('Hz', 1000000000000.0), ('V', 1.0))
    """
    return _SCALES.get(speaks, (speaks, 1.0))


def _to_spoken(value: float, unit: str, speaks: str) -> float:
    base, scale = base_of(speaks)
    if (unit, base) == ("dBm", "W"):
        value = quantity.watts(value)
    elif (unit, base) == ("nm", "Hz"):
        value = quantity.optical_frequency_hz(value)
    elif (unit, base) == ("nm", "m"):
        value = value / 1e9
    elif (unit, base) == ("Hz", "s"):
        value = 1.0 / value
    return value / scale


def _from_spoken(number: float, unit: str, speaks: str) -> float | None:
    base, scale = base_of(speaks)
    value = number * scale
    if (unit, base) == ("dBm", "W"):
        return quantity.dbm(value) if value > 0 else -math.inf
    if (unit, base) == ("W", "dBm"):
        return quantity.watts(value)
    if (unit, base) == ("nm", "Hz"):
        return quantity.wavelength_nm(value)
    if (unit, base) == ("nm", "m"):
        return value * 1e9
    if (unit, base) == ("Hz", "s"):
        return 1.0 / value if value > 0 else math.inf
    return value
