"""Bits of the registers that a controller looks at."""

from __future__ import annotations

from enum import IntEnum

from owlight.scpi.words import parse_number

_HIGHEST = 65_535  # some instruments use bit 15 all the same


class Operation(IntEnum):
    """Operation condition register, `STATus:OPERation:CONDition?` (SCPI-99 volume 1, 9)."""

    CALIBRATING = 0
    SETTLING = 1
    RANGING = 2
    SWEEPING = 3
    MEASURING = 4
    WAITING_FOR_TRIGGER = 5
    WAITING_FOR_ARM = 6
    CORRECTING = 7


def has_bit(register: str, bit: int) -> bool:
    """ValueError where the answer is no register: 16 bits, the highest never set (SCPI-99 volume 1, 9, from memory).

    >>> has_bit("+18", Operation.MEASURING), has_bit("2", Operation.MEASURING)
    (True, False)
    """
    value = parse_number(register)
    if value is None or not 0 <= value <= _HIGHEST or value != int(value):
        raise ValueError(f"{register!r} is no register of at most 16 bits")
    return bool(int(value) >> bit & 1)
