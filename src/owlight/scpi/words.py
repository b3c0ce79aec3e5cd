"""Numbers, booleans, strings and mnemonics of program and response messages."""

from __future__ import annotations

import math
import re

# SCPI-99 volume 1, 7.2.1 (from memory): infinity 9.9E37, negative infinity -9.9E37, not a number 9.91E37
_INFINITY = 9.9e37
_NOT_A_NUMBER = 9.91e37
# IEEE 488.2, 8.7.2 to 8.7.4 (from memory): NR1, NR2, NR3; a point may lead or trail here, as instruments do it
_DECIMAL = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?")


def write_number(value: float) -> str:
    """A number without suffix that reads back as the same double.

    >>> write_number(1.55012e-06), write_number(-3.0), write_number(20), write_number(1.934e14)
    ('1.55012E-06', '-3', '20', '193400000000000')
    """
    if not math.isfinite(value):
        raise ValueError(f"{value} cannot be sent to an instrument")
    if value == int(value) and abs(value) < 1e15:
        return str(int(value))
    return repr(value).upper()


def parse_number(text: str) -> float | None:
    """The number, or None where the instrument said not-a-number; infinities stay infinite.

    >>> parse_number("+1.55012E-06"), parse_number("9.91E37"), parse_number("-9.9E+37")
    (1.55012e-06, None, -inf)
    """
    cleaned = text.strip()
    if cleaned.upper() in {"NAN", "+NAN", "-NAN"}:
        return None
    if _DECIMAL.fullmatch(cleaned) is None:
        raise ValueError(f"{text!r} is not a number")
    value = float(cleaned)
    if math.isclose(value, _NOT_A_NUMBER, rel_tol=1e-6):
        return None
    if abs(value) >= _INFINITY * (1 - 1e-6):
        return math.copysign(math.inf, value)
    return value


def parse_boolean(text: str) -> bool:
    """SCPI answers 0 or 1; ON and OFF are a habit of some instruments.

    >>> parse_boolean("1"), parse_boolean("+0"), parse_boolean("ON")
    (True, False, True)
    """
    word = text.strip().upper()
    if word in {"1", "+1", "ON"}:
        return True
    if word in {"0", "+0", "-0", "OFF"}:
        return False
    raise ValueError(f"{text!r} is neither 0 nor 1")


def parse_string(text: str) -> str:
    """String response data: double quotes around, an inner quote doubled (IEEE 488.2, 8.7.8, from memory).

    >>> parse_string('"say ""when"" now"')
    'say "when" now'
    """
    inner = text.strip()
    if len(inner) >= 2 and inner[0] == inner[-1] and inner[0] in "\"'":
        return inner[1:-1].replace(inner[0] * 2, inner[0])
    return inner


def split(text: str, separator: str) -> list[str]:
    """The parts between separators that stand outside quotes.

    >>> split('-222,"Data out of range; 5, not 3"', ",")
    ['-222', '"Data out of range; 5, not 3"']
    """
    parts = [""]
    quote = ""
    for character in text:
        if character == separator and not quote:
            parts.append("")
            continue
        if character in "\"'" and quote in ("", character):
            quote = "" if quote else character
        parts[-1] += character
    return [part.strip() for part in parts]


def short_form(mnemonic: str) -> str:
    """The short form of a mnemonic written with its short form in capitals.

    >>> short_form("MANual"), short_form("QPSK")
    ('MAN', 'QPSK')
    """
    return "".join(character for character in mnemonic if not character.islower()) or mnemonic


def matches(mnemonic: str, text: str) -> bool:
    """Whether an answer is the short or the long form, in any case.

    >>> matches("MANual", "man"), matches("MANual", "MANUAL"), matches("MANual", "manu")
    (True, True, False)
    """
    word = text.strip().upper()
    return word in {mnemonic.upper(), short_form(mnemonic).upper()}
