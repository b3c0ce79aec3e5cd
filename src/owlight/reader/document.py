"""A text read against a model; content never raises."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Generic, TypeVar, cast

from owlight.errors import Problem
from owlight.reader.lines import Path, line_of_each_path
from owlight.reader.walk import Walk

T = TypeVar("T")
_LARGEST_TEXT = 1_000_000  # characters; the files of a night have a few thousand
_LONGEST_LINE = 8_000  # a key of thousands of parts costs the parser quadratically
_BARE = re.compile(r"[A-Za-z0-9_-]+")


@dataclass(frozen=True)
class Document(Generic[T]):
    """`value` is what could be read; use it only when `problems` is empty, or to look for more problems.

    It is None when a required part is missing. Parts that were wrong are left out or stand at their default.
    """

    file: str
    value: T | None
    problems: tuple[Problem, ...]
    lines: Mapping[Path, int] = field(default_factory=dict, repr=False)

    def problem(self, path: Path, words: str) -> Problem:
        """A problem at a key, on its line or on that of the nearest table around it."""
        lengths = range(len(path), 0, -1)
        line = next((self.lines[path[:length]] for length in lengths if path[:length] in self.lines), None)
        return Problem(self.file, line, spelled(path), words)

    def holds(self, path: Path) -> bool:
        """Whether the file mentions this key, readable or not."""
        return path in self.lines

    def plus(self, problems: tuple[Problem, ...]) -> Document[T]:
        """The same with more problems, all in the order of their lines."""
        together = sorted((*self.problems, *problems), key=lambda problem: problem.line or 0)
        return replace(self, problems=tuple(together))


def spelled(path: Path) -> str:
    """A path as a person would write it; tables of one name are counted from one.

    >>> spelled(("sweep", 1, "signal_laser.power"))
    'sweep[2]."signal_laser.power"'
    """
    text = ""
    for part in path:
        if isinstance(part, int):
            text += f"[{part + 1}]"
        else:
            text += "." * bool(text) + (part if _BARE.fullmatch(part) else f'"{part}"')
    return text


def read(text: str, file: str, model: type[T]) -> Document[T]:
    """The text as an instance of a frozen dataclass, with every problem and its line."""
    text = text.removeprefix("\ufeff")  # some editors write a byte order mark
    oversize = _oversize(text)
    if oversize is not None:
        return Document(file, None, (Problem(file, oversize[0], "", oversize[1]),))
    try:
        raw = tomllib.loads(text)
        lines = line_of_each_path(text)
    except tomllib.TOMLDecodeError as error:
        return Document(file, None, (_syntax(text, file, str(error)),))
    except ValueError:  # a number of thousands of digits
        return Document(file, None, (Problem(file, None, "", "a number has too many digits"),))
    except RecursionError:
        return Document(file, None, (Problem(file, None, "", "lists or tables are nested too deeply"),))
    walk = Walk()
    value = cast("T | None", walk.table(raw, model, ()))
    document: Document[T] = Document(file, value, (), lines)
    return document.plus(tuple(document.problem(path, words) for path, words in walk.found))


def _oversize(text: str) -> tuple[int | None, str] | None:
    if len(text) > _LARGEST_TEXT:
        return None, f"the file has {len(text)} characters; at most {_LARGEST_TEXT} are read"
    for number, line in enumerate(text.split("\n"), 1):
        if len(line) > _LONGEST_LINE:
            return number, f"the line has {len(line)} characters; break it into lines of at most {_LONGEST_LINE}"
    return None


def _syntax(text: str, file: str, words: str) -> Problem:
    place = re.search(r" \(at (?:line (\d+), column \d+|end of document)\)$", words)
    if place is None:
        return Problem(file, None, "", words)
    line = int(place[1]) if place[1] else 1 + text.rstrip("\n").count("\n")
    return Problem(file, line, "", f"not TOML: {words[: place.start()]}")
