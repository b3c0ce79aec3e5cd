"""What a file says about a term, as a term and a value in that term's unit; ValueError says what is allowed."""

from __future__ import annotations

import difflib
import math

from owlight import quantity
from owlight.reader import nearest
from owlight.vocabulary.terms import ROLES, TERMS, term_of
from owlight.vocabulary.values import Term, Value

MOST_VALUES = 10_000
_CERTAIN = 0.85  # a guess is only shown; here a wrong one would invent mistakes
_POWERS = {"dBm", "W"}
_TYPE_WORDS = {int: "a whole number", bool: "true or false", str: "a string"}
_KIND_WORDS = {
    "reading": "can only be read",
    "action": "is something an instrument does",
    "setting": "is a setting",
    "quantity": "is a quantity of the bench",
}


def term_named(text: str, kinds: tuple[str, ...]) -> Term:
    """
    >>> term_named("signal_laser.pwer", ("setting",))
    Traceback (most recent call last):
    ValueError: unknown term "signal_laser.pwer"; did you mean "signal_laser.power"?
    """
    try:
        term = term_of(text)
    except KeyError:
        raise ValueError(_unknown(text)) from None
    kind = TERMS[term].kind
    if kind not in kinds:
        allowed = ", ".join(
            str(known) for known, info in TERMS.items() if info.kind in kinds and known.role == term.role
        )
        raise ValueError(
            f"{text} {_KIND_WORDS[kind]} and does not belong here" + f"; allowed: {allowed}" * bool(allowed)
        )
    return term


def _unknown(text: str) -> str:
    role, _, _name = text.rpartition(".")
    if role and role not in ROLES:
        return f'unknown role "{role}"{nearest(role, ROLES)} Roles: {", ".join(ROLES)}'
    names = [str(term) for term in TERMS if not role or term.role == role]
    hint = nearest(text, map(str, TERMS)) or f"; {role or 'the bench'} has {', '.join(names)}"
    return f'unknown term "{text}"{hint}'


def meant(text: str, kinds: tuple[str, ...]) -> Term | None:
    """What a name that is unknown certainly means, so that what stands beside it is judged in the same round.

    >>> str(meant("signal_laser.pwer", ("setting",))), meant("signal_laser.frequency", ("setting",))
    ('signal_laser.power', None)
    """
    known = {str(term): term for term, info in TERMS.items() if info.kind in kinds}
    close = difflib.get_close_matches(text.lower(), known, 1, _CERTAIN)
    return known[close[0]] if close else None


def value_for(raw: object, term: Term) -> Value:
    """
    >>> value_for("1 mW", term_of("signal_laser.power")), value_for(15, term_of("pattern_source.pattern_order"))
    (0.0, 15)
    """
    info = TERMS[term]
    if info.type is not float:
        if type(raw) is not info.type:
            raise ValueError(f"{raw!r} is not {_TYPE_WORDS[info.type]}, which {term} needs")
        return raw  # type: ignore[return-value]  # just compared with one of the types of Value
    return number_in(raw, info.unit)


def number_in(raw: object, unit: str) -> float:
    """A quantity with its unit, or a bare number where there is none."""
    if unit and isinstance(raw, str):
        try:
            value = quantity.parse(raw, unit)
        except OverflowError:
            value = math.inf
    elif unit or isinstance(raw, bool) or not isinstance(raw, int | float):
        raise ValueError(f"{raw!r} is not {quantity.kind_of(unit) + ' in quotes' if unit else 'a bare number'}")
    else:
        value = float(raw)
    if not math.isfinite(value):
        raise ValueError(f"{raw!r} is beyond all numbers")
    return value


def drift_unit(term: Term) -> str:
    """A power drifts by a ratio."""
    unit = TERMS[term].unit
    return "dB" if unit in _POWERS else unit


def stepped(first: float, last: float, step_raw: object, term: Term) -> tuple[float, ...]:
    """From the first to the last value, both included, in equal steps.

    >>> stepped(-38.0, -37.0, "0.5 dB", term_of("received_power"))
    (-38.0, -37.5, -37.0)
    """
    unit = {"dBm": "dB"}.get(TERMS[term].unit, TERMS[term].unit)
    if unit == "nm" and not str(step_raw).rstrip().endswith("m"):
        raise ValueError(f"{step_raw!r} is no step between wavelengths; write it in nm")
    step = number_in(step_raw, unit)
    if step <= 0:
        raise ValueError(f"{step_raw!r} is not above zero; the direction follows from `from` and `to`")
    count = round(abs(last - first) / step)
    if count >= MOST_VALUES:
        raise ValueError(f"{step_raw!r} gives {count + 1} values; at most {MOST_VALUES} are allowed")
    if abs(count * step - abs(last - first)) > 1e-6 * step:
        raise ValueError(f"the way from `from` to `to` is not a whole number of steps of {step_raw!r}")
    signed = math.copysign(step, last - first)
    # 0.1 has no exact binary form: without rounding a point would be called -37.900000000000006 dBm
    return tuple(round(first + place * signed, 9) for place in range(count + 1))
