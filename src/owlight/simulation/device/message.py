"""Program messages apart: units, headers, parameters (IEEE 488.2 clause 7, listening side)."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

from owlight.simulation.device.errors import DeviceError

Kind = Literal["number", "nondecimal", "word", "string", "block", "expression"]
_SPACE = "".join(chr(code) for code in range(33) if code != 10)  # clause 7.4.1.2: all but NL
_LONGEST_MNEMONIC = 12
_MOST_DIGITS = 255
_MNEMONIC = re.compile(r"[A-Za-z][A-Za-z0-9_]*")
_HEADER = re.compile(r"(?:\*[A-Za-z][A-Za-z0-9_]*|:?[A-Za-z][A-Za-z0-9_]*(?::[A-Za-z][A-Za-z0-9_]*)*)\??")
_DECIMAL = re.compile(r"([+-]?(?:\d+\.?\d*|\.\d+)(?:\s*[eE]\s*[+-]?\d+)?)\s*([A-Za-z/][A-Za-z0-9/.^-]*)?")
_NONDECIMAL = re.compile(r"#(?:[hH]([0-9a-fA-F]+)|[qQ]([0-7]+)|[bB]([01]+))")
_STRING = re.compile(r"\"(?:[^\"]|\"\")*\"|'(?:[^']|'')*'")


@dataclass(frozen=True)
class Parameter:
    """`text` is the number, the word in capitals, the string without its quotes, or the block's bytes as latin-1."""

    kind: Kind
    text: str
    suffix: str = ""


@dataclass(frozen=True)
class Unit:
    """One program message unit. `path` in capitals; a common command has its asterisk in the one node."""

    path: tuple[str, ...]
    absolute: bool
    query: bool
    parameters: tuple[Parameter, ...]

    @property
    def common(self) -> bool:
        return self.path[0].startswith("*")

    def __str__(self) -> str:
        return ":".join(self.path) + "?" * self.query


def units(text: str) -> Iterator[Unit]:
    """One unit after the other, so that those before a mistake have been executed when it is found.

    >>> [str(unit) for unit in units("*CLS; :SOUR:POW 1 DBM,2;LEV?")]
    ['*CLS', 'SOUR:POW', 'LEV?']
    """
    reader = _Reader(text)
    while not reader.at_end():
        if reader.skip(";"):
            continue  # an empty unit is allowed
        yield reader.unit()


class _Reader:
    def __init__(self, text: str) -> None:
        self.text = text
        self.at = 0

    def space(self) -> bool:
        start = self.at
        while self.at < len(self.text) and self.text[self.at] in _SPACE:
            self.at += 1
        return self.at > start

    def at_end(self) -> bool:
        self.space()
        return self.at >= len(self.text)

    def skip(self, character: str) -> bool:
        self.space()
        found = self.text.startswith(character, self.at)
        self.at += found
        return found

    def unit(self) -> Unit:
        header = self._take(_HEADER)
        if header is None:
            raise DeviceError(-101 if ord(self.text[self.at]) > 126 else -102, self.text[self.at :][:20])
        spaced = self.space()
        parameters: tuple[Parameter, ...] = ()
        if self.at < len(self.text) and self.text[self.at] != ";":
            if not spaced:
                raise DeviceError(-111 if self.text[self.at] not in ",:" else -103, header[0])
            parameters = tuple(self._parameters())
        return _unit(header[0], parameters)

    def _parameters(self) -> Iterator[Parameter]:
        yield self._parameter()
        while self.skip(","):
            yield self._parameter()
        if not self.at_end() and self.text[self.at] != ";":
            raise DeviceError(-103, self.text[self.at :][:20])

    def _take(self, pattern: re.Pattern[str]) -> re.Match[str] | None:
        self.space()
        match = pattern.match(self.text, self.at)
        self.at = match.end() if match else self.at
        return match

    def _parameter(self) -> Parameter:
        self.space()
        first = self.text[self.at : self.at + 1]
        if not first or first in ",;":
            raise DeviceError(-109)
        if first == "#":
            return self._hash()
        if first in "\"'":
            return self._string(first)
        if first == "(":
            return self._expression()
        return self._number_or_word(first)

    def _number_or_word(self, first: str) -> Parameter:
        if match := self._take(_DECIMAL):
            return Parameter("number", re.sub(r"\s", "", match[1]), (match[2] or "").upper())
        if first in "+-.":
            raise DeviceError(-121, self.text[self.at :][:20])
        match = self._take(_MNEMONIC)
        if match is None:
            raise DeviceError(-101 if ord(first) > 126 else -102, self.text[self.at :][:20])
        if len(match[0]) > _LONGEST_MNEMONIC:
            raise DeviceError(-144, match[0])
        return Parameter("word", match[0].upper())

    def _hash(self) -> Parameter:
        if match := self._take(_NONDECIMAL):
            digits, base = next(
                (digits, base) for digits, base in zip(match.groups(), (16, 8, 2), strict=True) if digits
            )
            if len(digits) > _MOST_DIGITS:
                raise DeviceError(-124)
            return Parameter("nondecimal", str(int(digits, base)))
        start, end = block_span(self.text, self.at)
        if end is None:
            raise DeviceError(-161)
        self.at = end
        return Parameter("block", self.text[start:end])

    def _string(self, quote: str) -> Parameter:
        match = self._take(_STRING)
        if match is None:
            raise DeviceError(-151)
        return Parameter("string", match[0][1:-1].replace(quote * 2, quote))

    def _expression(self) -> Parameter:
        end = self.text.find(")", self.at)
        if end < 0:
            raise DeviceError(-171)
        text, self.at = self.text[self.at : end + 1], end + 1
        return Parameter("expression", text)


def _unit(header: str, parameters: tuple[Parameter, ...]) -> Unit:
    path = tuple(header.rstrip("?").lstrip(":").upper().split(":"))
    if any(len(node.lstrip("*")) > _LONGEST_MNEMONIC for node in path):
        raise DeviceError(-112, header)
    return Unit(path, header.startswith((":", "*")), header.endswith("?"), parameters)


def block_span(text: str, at: int) -> tuple[int, int | None]:
    """Where the data of the block at `at` begin and end; an end of None means that they are not whole.

    >>> block_span("#15hello", 0), block_span("#15hell", 0), block_span("#0hello", 0)
    ((3, 8), (3, None), (2, 7))
    """
    digit = text[at + 1 : at + 2]
    if digit == "0":
        return at + 2, len(text)
    length = text[at + 2 : at + 2 + int(digit)] if digit.isdecimal() else ""
    start = at + 2 + len(length)
    if not length.isdecimal() or len(length) < int(digit):
        return start, None
    end = start + int(length)
    return start, end if end <= len(text) else None


def split(buffer: str) -> tuple[list[str], str]:
    """Whole messages and the unfinished rest: a NL inside a block or string ends nothing (clause 7.5).

    >>> split("*CLS\\nDATA #12a\\n\\n*IDN")
    (['*CLS', 'DATA #12a\\n'], '*IDN')
    """
    messages, start, at = [], 0, 0
    while at < len(buffer):
        character = buffer[at]
        if character == "\n":
            messages.append(buffer[start:at])
            start = at = at + 1
        elif character in "\"'":
            closing = buffer.find(character, at + 1)
            line_end = buffer.find("\n", at + 1)
            line_end_before = line_end >= 0 and line_end < closing  # an unclosed string must not swallow the session
            at = closing + 1 if closing >= 0 and not line_end_before else at + 1
        elif character == "#" and buffer[at + 1 : at + 2] in "123456789" and len(buffer) > at + 1:
            _, end = block_span(buffer, at)
            if end is None and _may_grow(buffer, at):
                return messages, buffer[start:]
            at = end if end is not None else at + 1
        else:
            at += 1
    return messages, buffer[start:]


def _may_grow(buffer: str, at: int) -> bool:
    """Whether what stands here is a block's beginning and not a mistake."""
    return buffer[at + 2 : at + 2 + int(buffer[at + 1])].isdecimal() or len(buffer) <= at + 2
