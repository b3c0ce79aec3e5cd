"""The answer to `*IDN?`."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class IdentityText:
    """Maker, model, serial number, firmware (IEEE 488.2, 10.14, from memory); "0" where it does not know."""

    maker: str
    model: str
    serial_number: str
    firmware: str

    @staticmethod
    def from_text(text: str) -> IdentityText:
        """Some firmware fields hold commas; fewer than four fields are no identity.

        >>> IdentityText.from_text("Owlight,Laser,OWL-SL-0001,1.0").serial_number
        'OWL-SL-0001'
        """
        fields = [field.strip() for field in text.strip().split(",", 3)]
        if len(fields) < 4:
            raise ValueError(f"{text!r} is not an identity of four fields")
        return IdentityText(*fields)


def tells_serial(serial_number: str) -> bool:
    """Whether an identity names its instrument: an empty field or "0" names none.

    >>> tells_serial("OWL-SL-0001"), tells_serial("0"), tells_serial("")
    (True, False, False)
    """
    return serial_number not in ("", "0")


def may_be(found: str, expected: str) -> bool:
    """The one rule for all who prove an instrument: what tells no serial number, or none is expected, may be it."""
    return not expected or not tells_serial(found) or found == expected
