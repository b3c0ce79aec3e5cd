"""The walk over a model: what a file holds against what a frozen dataclass allows.

A float field whose name ends in a unit is a quantity: its key in the file is the name less the unit, its value a
string with a unit. Wrong parts are reported and left out, so that what could be read can still be checked.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import MISSING, dataclass, fields, is_dataclass
from difflib import get_close_matches
from functools import cache
from types import NoneType, UnionType
from typing import Annotated, Any, Literal, Union, cast, get_args, get_origin, get_type_hints

from owlight import quantity
from owlight.reader.lines import Path

_UNITS = {
    "a_per_sqrt_hz": "A/sqrt(Hz)",
    "db_per_hz": "dB/Hz",
    "db_per_h": "dB/h",
    "hz_per_h": "Hz/h",
    "rad_per_s": "rad/s",
    "b_per_s": "b/s",
    "a_per_w": "A/W",
    "v_per_a": "V/A",
    "dbm": "dBm",
    "deg": "deg",
    "ppm": "ppm",
    "db": "dB",
    "nm": "nm",
    "hz": "Hz",
    "bd": "Bd",
    "s": "s",
    "v": "V",
    "a": "A",
    "w": "W",
    "m": "m",
}  # the longer name first: "noise_db_per_hz" is no frequency
_NAMES = {str: "a string", int: "a whole number", float: "a number", bool: "true or false"}
_UNUSABLE = object()


@dataclass(frozen=True)
class Within:
    """`Annotated[float, Within(low, high)]`: both ends allowed, in the unit of the field's name."""

    low: float
    high: float


@dataclass(frozen=True)
class _Field:
    name: str
    kind: Any
    unit: str
    required: bool


def key_of(name: str, kind: Any = float) -> str:
    """The key in the file of a field.

    >>> key_of("power_dbm"), key_of("name_", str), key_of("words", str)
    ('power', 'name', 'words')
    """
    return _key_and_unit(name, kind)[0]


def _key_and_unit(name: str, kind: Any) -> tuple[str, str]:
    if _holds_float(kind):
        for suffix, unit in _UNITS.items():
            if name.endswith(f"_{suffix}"):
                return name.removesuffix(f"_{suffix}"), unit
    return name.removesuffix("_"), ""


def _holds_float(kind: Any) -> bool:
    return kind is float or (not is_dataclass(kind) and any(map(_holds_float, get_args(kind))))


@cache
def _fields_of(model: type) -> dict[str, _Field]:
    hints = get_type_hints(model, include_extras=True)
    found = {}
    for item in fields(cast(Any, model)):
        key, unit = _key_and_unit(item.name, hints[item.name])
        required = item.default is MISSING and item.default_factory is MISSING
        found[key] = _Field(item.name, hints[item.name], unit, required)
    return found


def nearest(word: str, known: Iterable[str]) -> str:
    """Words that name the nearest of `known`, empty if nothing is near.

    >>> nearest("attenuaton", ["attenuation", "power"])
    '; did you mean "attenuation"?'
    """
    plain = {name.lower(): name for name in known}
    near = get_close_matches(word.lower(), plain, 1, 0.6)
    return f'; did you mean "{plain[near[0]]}"?' if near else ""


class Walk:
    """Collects what is wrong as (path, words) while it builds what can be built."""

    def __init__(self) -> None:
        self.found: list[tuple[Path, str]] = []

    def table(self, raw: object, model: type, path: Path) -> object | None:
        """An instance of `model`, or None where a required part is missing or wrong."""
        value = self._table(raw, model, path)
        return None if value is _UNUSABLE else value

    def _wrong(self, path: Path, words: str) -> object:
        self.found.append((path, words))
        return _UNUSABLE

    def _table(self, raw: object, model: type, path: Path) -> object:
        if not isinstance(raw, dict):
            return self._wrong(
                path, f"{_shown(raw)} stands where a table is needed, with {_allowed(_fields_of(model))}"
            )
        known = _fields_of(model)
        for key in raw:
            if key not in known:
                hint = nearest(key, known) or "; it means nothing here."
                self._wrong((*path, key), f"unknown key{hint} Allowed here: {_allowed(known)}")
        values: dict[str, object] = {}
        usable = True
        for key, item in known.items():
            if key in raw:
                value = self._value(raw[key], item.kind, item.unit, (*path, key))
                if value is not _UNUSABLE:
                    values[item.name] = value
                    continue
            elif item.required:
                self._wrong((*path, key), f"is missing; it needs {_wanted(item.kind, item.unit)}")
            usable = usable and not item.required
        return model(**values) if usable else _UNUSABLE

    def _value(self, raw: object, kind: Any, unit: str, path: Path) -> object:
        origin, arms = get_origin(kind), get_args(kind)
        if kind is Any:
            return raw
        if origin is Annotated:
            return self._within(self._value(raw, arms[0], unit, path), arms[1:], unit, path)
        if origin in (Union, UnionType):
            return self._union(raw, arms, unit, path)
        if origin is Literal:
            same = any(type(raw) is type(arm) and raw == arm for arm in arms)
            return raw if same else self._not_allowed(raw, arms, path)
        if origin is tuple:
            return self._sequence(raw, arms[0], unit, path)
        if origin is dict:
            return self._mapping(raw, arms[1], unit, path)
        if is_dataclass(kind):
            return self._table(raw, cast(type, kind), path)
        return self._scalar(raw, kind, unit, path)

    def _union(self, raw: object, arms: tuple[Any, ...], unit: str, path: Path) -> object:
        real = [arm for arm in arms if arm is not NoneType]
        if len(real) == 1:
            return self._value(raw, real[0], unit, path)
        for arm in real:
            attempt = Walk()
            value = attempt._value(raw, arm, unit, path)
            if not attempt.found:
                return value
        return self._wrong(path, f"{_shown(raw)} is not allowed; write {_either(real, unit)}")

    def _not_allowed(self, raw: object, arms: tuple[Any, ...], path: Path) -> object:
        hint = nearest(raw, [arm for arm in arms if isinstance(arm, str)]) if isinstance(raw, str) else ""
        return self._wrong(path, f"{_shown(raw)} is not allowed{hint or ';'} Allowed: {_allowed(arms)}")

    def _sequence(self, raw: object, kind: Any, unit: str, path: Path) -> object:
        if not isinstance(raw, list):
            return self._wrong(path, f"{_shown(raw)} stands where a list is needed: [ ... ] of {_wanted(kind, unit)}")
        values = (self._value(item, kind, unit, (*path, place)) for place, item in enumerate(raw))
        return tuple(value for value in values if value is not _UNUSABLE)

    def _mapping(self, raw: object, kind: Any, unit: str, path: Path) -> object:
        if not isinstance(raw, dict):
            return self._wrong(path, f"{_shown(raw)} stands where a table is needed")
        values = {key: self._value(item, kind, unit, (*path, key)) for key, item in raw.items()}
        return {key: value for key, value in values.items() if value is not _UNUSABLE}

    def _scalar(self, raw: object, kind: Any, unit: str, path: Path) -> object:
        if kind is float and unit:
            return self._quantity(raw, unit, path)
        if kind is float and type(raw) is int and abs(raw) < 2**53:
            return float(raw)
        if type(raw) is not kind or (isinstance(raw, float) and not math.isfinite(raw)):
            return self._wrong(path, f"{_shown(raw)} is not {_NAMES[kind]}; write {_wanted(kind, unit)}")
        return raw

    def _quantity(self, raw: object, unit: str, path: Path) -> object:
        if not isinstance(raw, str):
            return self._wrong(path, f"{_shown(raw)} has no unit; write {_wanted(float, unit)} in quotes")
        try:
            value = quantity.parse(raw, unit)
        except ValueError as error:
            return self._wrong(path, str(error))
        except OverflowError:
            value = math.inf
        return value if math.isfinite(value) else self._wrong(path, f"{raw!r} is beyond all numbers")

    def _within(self, value: object, marks: tuple[Any, ...], unit: str, path: Path) -> object:
        for mark in marks:
            if isinstance(mark, Within) and isinstance(value, (int, float)) and not mark.low <= value <= mark.high:
                low, high = (quantity.words(end, unit) for end in (mark.low, mark.high))
                return self._wrong(path, f"{quantity.words(value, unit)} is outside {low} to {high}")
        return value


def _shown(raw: object) -> str:
    if isinstance(raw, bool):
        return "true" if raw else "false"
    if isinstance(raw, (dict, list)):
        return "a table" if isinstance(raw, dict) else "a list"
    text = repr(raw) if isinstance(raw, str) else str(raw)
    return text if len(text) <= 60 else f"{text[:57]}..."


def _allowed(names: Iterable[object]) -> str:
    return ", ".join(str(name) for name in names)


def _either(arms: Iterable[Any], unit: str) -> str:
    return " or ".join(_wanted(arm, unit) for arm in arms if arm is not NoneType)


def _wanted(kind: Any, unit: str) -> str:
    origin, arms = get_origin(kind), get_args(kind)
    if origin is Annotated:
        return _wanted(arms[0], unit)
    if origin is Literal:
        return "one of " + _allowed(arms)
    if origin in (Union, UnionType):
        return _either(arms, unit)
    if origin is tuple:
        return f"a list of {_wanted(arms[0], unit)}"
    if origin is dict or is_dataclass(kind):
        return "a table"
    return quantity.kind_of(unit) if kind is float and unit else _NAMES.get(kind, "a value")
