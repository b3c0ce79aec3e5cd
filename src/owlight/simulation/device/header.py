"""The command tree: patterns such as `[SOURce]:POWer[:LEVel]`, and what a sent header means (SCPI-99 vol. 1, ch. 6)."""

from __future__ import annotations

import itertools
import re
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Generic, TypeVar

from owlight.simulation.device.errors import DeviceError
from owlight.simulation.device.message import Unit

T = TypeVar("T")
_NODE = re.compile(r"(\[)?:?(\*?[A-Z]+)([a-z]*)(\d*)(<n>)?\]?")
_TRAILING = re.compile(r"^(.*?)(\d+)$")


@dataclass(frozen=True)
class Node:
    """`short` is the capitals of the pattern, `long` the whole mnemonic in capitals."""

    short: str
    long: str
    optional: bool
    numbered: bool


def nodes_of(pattern: str) -> tuple[Node, ...]:
    """
    >>> [node.short for node in nodes_of("[SENSe]:VOLTage<n>[:DC]:RANGe[:UPPer]")]
    ['SENS', 'VOLT', 'DC', 'RANG', 'UPP']
    """
    found = []
    end = 0
    for match in _NODE.finditer(pattern):
        opening, capitals, rest, digits, numbered = match.groups()
        if match.start() != end:
            break
        end = match.end()
        long = (capitals + rest).upper() + digits
        found.append(Node(capitals + digits, long, opening is not None, numbered is not None))
    if end != len(pattern) or not found:
        raise ValueError(f"{pattern!r} is not a header pattern such as [SOURce]:POWer[:LEVel]")
    return tuple(found)


@dataclass(frozen=True)
class Found(Generic[T]):
    """`suffix` is the number behind the numbered node, 1 where it was left out."""

    target: T
    suffix: int


class CommandTree(Generic[T]):
    """Every spelling of every header; filled once, asked for each unit."""

    def __init__(self) -> None:
        self._short: dict[str, str] = {}
        self._targets: dict[tuple[tuple[str, ...], bool], tuple[T, int | None]] = {}

    def add(self, pattern: str, target: T, forms: Iterable[bool] = (False, True)) -> None:
        """`forms`: False is the command, True the query. ValueError if a spelling is taken."""
        nodes = nodes_of(pattern)
        for node in nodes:
            for word in (node.short, node.long):
                if self._short.setdefault(word, node.short) != node.short:
                    raise ValueError(f"{pattern!r}: {word} already stands for {self._short[word]}")
        for chosen in itertools.product(*((True, False) if node.optional else (True,) for node in nodes)):
            kept = [node for node, keep in zip(nodes, chosen, strict=True) if keep]
            place = next((place for place, node in enumerate(kept) if node.numbered), None)
            key = tuple(node.short for node in kept)
            for query in forms:
                if key and self._targets.setdefault((key, query), (target, place)) != (target, place):
                    raise ValueError(f"{pattern!r} can be spelled like another command: {':'.join(key)}")

    def find(self, unit: Unit, path: tuple[str, ...]) -> Found[T]:
        """What the unit means where `path` is the header path left by the unit before; -113 or -114 otherwise."""
        sent = unit.path if unit.absolute else (*path, *unit.path)
        words = tuple(self._word(node) for node in sent)
        known = self._targets.get((tuple(short for short, _ in words), unit.query))
        if known is None:
            raise DeviceError(-113, str(unit))
        target, place = known
        for position, (_, number) in enumerate(words):
            if number is not None and position != place and number != 1:
                raise DeviceError(-114, str(unit))
        number = None if place is None else words[place][1]
        return Found(target, 1 if number is None else number)

    def _word(self, sent: str) -> tuple[str, int | None]:
        if sent in self._short:
            return self._short[sent], None
        match = _TRAILING.match(sent)
        if match is None:
            return sent, None
        return self._short.get(match[1], match[1]), int(match[2])


def path_after(unit: Unit, path: tuple[str, ...]) -> tuple[str, ...]:
    """The header path that the next unit starts from: all but the last node sent; common commands leave it alone."""
    if unit.common:
        return path
    return (unit.path if unit.absolute else (*path, *unit.path))[:-1]
