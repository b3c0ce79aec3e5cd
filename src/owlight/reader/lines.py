"""On which line each key of a TOML text stands; tomllib keeps no positions.

Only for texts that tomllib has accepted: nothing is judged here, so a wrong text gives a wrong line at worst.
"""

from __future__ import annotations

import re
import tomllib
from bisect import bisect_right
from collections.abc import Mapping

Path = tuple[str | int, ...]
"""Keys, and positions in arrays counted from zero: `("sweep", 1, "values")`."""

_DEEPEST = 32  # no model of ours is deeper; a hostile key of a thousand parts would cost memory quadratically
_KEY = re.compile(r'"(?:[^"\\\n]|\\.)*"|\'[^\'\n]*\'|[A-Za-z0-9_-]+')
_GAP = re.compile(r"(?:[ \t\r\n]+|#[^\n]*)*")
_SCALAR = re.compile(
    r'"""(?:[^\\]|\\.)*?"{3,5}'  # up to two quotes may stand before the closing three
    r"|'''.*?'{3,5}"
    r'|"(?:[^"\\\n]|\\.)*"'
    r"|'[^'\n]*'"
    r"|[^,\]}#\n]+",
    re.DOTALL,
)


def line_of_each_path(text: str) -> Mapping[Path, int]:
    """The line of the first mention of every key path.

    >>> line_of_each_path('a = 1\\n[[b]]\\nc = [2,\\n3]\\n')[("b", 0, "c", 1)]
    4
    """
    index = _Index(text.replace("\r\n", "\n"))
    index.statements()
    return index.lines


class _Index:
    def __init__(self, text: str) -> None:
        self.text = text
        self.at = 0
        self.lines: dict[Path, int] = {}
        self._tables_in: dict[Path, int] = {}
        self._breaks = [match.start() for match in re.finditer("\n", text)]

    def statements(self) -> None:
        table: Path = ()
        while self._skip_gap() < len(self.text):
            if self.text.startswith("[", self.at):
                table = self._header()
            else:
                self._pair(table)

    def _skip_gap(self) -> int:
        gap = _GAP.match(self.text, self.at)
        self.at = gap.end() if gap else self.at
        return self.at

    def _note(self, path: Path, known: int) -> None:
        line = 1 + bisect_right(self._breaks, self.at)
        for length in range(known + 1, min(len(path), _DEEPEST) + 1):
            self.lines.setdefault(path[:length], line)

    def _key(self) -> Path:
        parts: list[str] = []
        while match := _KEY.match(self.text, self.at):
            token = match[0]
            parts.append(tomllib.loads(f"k={token}")["k"] if token[0] in "\"'" else token)
            self.at = match.end()
            self._skip_gap()
            if not self.text.startswith(".", self.at):
                break
            self.at += 1
            self._skip_gap()
        return tuple(parts)

    def _header(self) -> Path:
        brackets = 2 if self.text.startswith("[[", self.at) else 1
        start = self.at
        self.at += brackets
        self._skip_gap()
        key = self._key()
        end, self.at = self.at + brackets, start
        path: Path = ()
        for place, part in enumerate(key):
            path = (*path, part)
            if brackets == 2 and place == len(key) - 1:
                self._tables_in[path] = self._tables_in.get(path, 0) + 1
            if path in self._tables_in:
                path = (*path, self._tables_in[path] - 1)
        self._note(path, 0)
        self.at = end
        return path

    def _pair(self, table: Path) -> None:
        start = self.at
        key = self._key()
        end, self.at = self.at, start
        self._note((*table, *key), len(table))
        self.at = end + 1  # the equals sign
        self._skip_gap()
        self._value((*table, *key))

    def _value(self, path: Path) -> None:
        opening = self.text[self.at]
        if opening not in "[{":
            scalar = _SCALAR.match(self.text, self.at)
            self.at = scalar.end() if scalar else len(self.text)
            return
        self.at += 1
        place = 0
        while self.text[self._skip_gap()] not in "]}":
            if opening == "{":
                self._pair(path)
            else:
                self._note((*path, place), len(path))
                self._value((*path, place))
                place += 1
            if self.text[self._skip_gap()] == ",":
                self.at += 1
        self.at += 1
