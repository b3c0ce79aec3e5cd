"""Entries of the error queue and what they mean for the one who asked."""

from __future__ import annotations

from dataclasses import dataclass

from owlight.scpi.words import parse_string, split

OUT_OF_RANGE = (-222, -224)
POWER_ON = -500
# SCPI-99 volume 2, 21.8 (numbers read there; the reactions are ours)
_HINTS = {
    -113: "the instrument does not know this header: its driver file does not fit it",
    -131: "the instrument takes another suffix: write bare numbers in its driver file",
    -138: "the instrument takes no suffix: write bare numbers in its driver file",
    -201: "the instrument is in local: somebody touched its front panel",
    -202: "the instrument lost settings when it was set to local",
    -213: "an acquisition was armed already",
    -221: "it conflicts with another setting: look at the order of settings",
    -230: "the data are older than the question",
    -240: "the instrument reports a hardware fault",
    -313: "the instrument lost its calibration: its readings are not traceable",
    -350: "the error queue overflowed, so entries were lost",
    -410: "a question was asked before the last answer was read",
}


@dataclass(frozen=True)
class ErrorEntry:
    """`0,"No error"` has number 0. Negative numbers are the standard's, positive ones the maker's."""

    number: int
    words: str

    @staticmethod
    def from_text(text: str) -> ErrorEntry:
        """
        >>> ErrorEntry.from_text('-222,"Data out of range;POW"')
        ErrorEntry(number=-222, words='Data out of range;POW')
        """
        number, *words = split(text, ",")
        try:
            return ErrorEntry(int(number), parse_string(", ".join(words)))
        except ValueError:
            raise ValueError(f"{text!r} is not an entry of an error queue") from None

    def __str__(self) -> str:
        return f'{self.number},"{self.words}"'

    @property
    def event_bit(self) -> int | None:
        """The bit of the standard event register that goes with it (IEEE 488.2, 11.5.1, from memory)."""
        if self.number > 0:
            return 3
        return {1: 5, 2: 4, 3: 3, 4: 2, 5: 7, 6: 6, 7: 1, 8: 0}.get(-self.number // 100)


def hint(entry: ErrorEntry) -> str:
    """What a person should look at; empty where the entry says enough."""
    return _HINTS.get(entry.number, "")
