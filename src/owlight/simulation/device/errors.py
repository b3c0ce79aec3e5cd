"""Standard error numbers and texts (SCPI-99 volume 2, SYSTem:ERRor), and the event bit each class sets."""

from __future__ import annotations

TEXTS: dict[int, str] = {
    0: "No error",
    -100: "Command error",
    -101: "Invalid character",
    -102: "Syntax error",
    -103: "Invalid separator",
    -104: "Data type error",
    -108: "Parameter not allowed",
    -109: "Missing parameter",
    -110: "Command header error",
    -111: "Header separator error",
    -112: "Program mnemonic too long",
    -113: "Undefined header",
    -114: "Header suffix out of range",
    -115: "Unexpected number of parameters",
    -120: "Numeric data error",
    -121: "Invalid character in number",
    -123: "Exponent too large",
    -124: "Too many digits",
    -128: "Numeric data not allowed",
    -130: "Suffix error",
    -131: "Invalid suffix",
    -134: "Suffix too long",
    -138: "Suffix not allowed",
    -140: "Character data error",
    -141: "Invalid character data",
    -144: "Character data too long",
    -148: "Character data not allowed",
    -150: "String data error",
    -151: "Invalid string data",
    -158: "String data not allowed",
    -160: "Block data error",
    -161: "Invalid block data",
    -168: "Block data not allowed",
    -170: "Expression error",
    -171: "Invalid expression",
    -178: "Expression data not allowed",
    -200: "Execution error",
    -213: "Init ignored",
    -220: "Parameter error",
    -221: "Settings conflict",
    -222: "Data out of range",
    -224: "Illegal parameter value",
    -230: "Data corrupt or stale",
    -240: "Hardware error",
    -241: "Hardware missing",
    -300: "Device-specific error",
    -310: "System error",
    -330: "Self-test failed",
    -340: "Calibration failed",
    -350: "Queue overflow",
    -363: "Input buffer overrun",
    -400: "Query error",
    -410: "Query INTERRUPTED",
    -420: "Query UNTERMINATED",
    -430: "Query DEADLOCKED",
    -440: "Query UNTERMINATED after indefinite response",
    -500: "Power on",
    -600: "User request",
    -700: "Request control",
    -800: "Operation complete",
}

# bits of the standard event status register, IEEE 488.2 clause 11.5.1
OPC, RQC, QYE, DDE, EXE, CME, URQ, PON = (1 << bit for bit in range(8))
_BIT_OF_HUNDREDS = {1: CME, 2: EXE, 3: DDE, 4: QYE, 5: PON, 6: URQ, 7: RQC, 8: OPC}


class DeviceError(Exception):
    """What goes into the error queue: a number of the standard and what this instrument adds to it."""

    def __init__(self, number: int, detail: str = "") -> None:
        self.number = number
        self.detail = detail
        super().__init__(number, detail)


def event_bit(number: int) -> int:
    """The bit of the standard event status register that an error sets; a maker's own (positive) one is DDE.

    >>> event_bit(-113) == CME, event_bit(-222) == EXE, event_bit(7) == DDE
    (True, True, True)
    """
    return DDE if number > 0 else _BIT_OF_HUNDREDS.get(-number // 100, 0)


def entry(number: int, detail: str = "") -> str:
    """A queue entry as it is answered; at most 255 characters of text (SCPI-99 21.8).

    >>> entry(-222, "power 99 DBM")
    '-222,"Data out of range;power 99 DBM"'
    """
    text = TEXTS.get(number, "Device-specific error") + (f";{detail}" if detail else "")
    quoted = text[:255].replace('"', "'")
    return f'{number},"{quoted}"'
