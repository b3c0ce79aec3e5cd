"""The line of each key agrees with a writer that knows where it wrote."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass, field

from hypothesis import given, settings
from hypothesis import strategies as st

from owlight.reader.lines import Path, line_of_each_path

SCALARS = [
    "1",
    "-2.5e3",
    "true",
    '"a # b"',
    "'c]d'",
    '"""x\ny = 2\n"""',
    "'''\n[[z]]\n'''",
    '"\\"q\\""',
    '""""""',
    '"""a"""""',
    "1979-05-27 07:32:00",
    '""',
    "'''a''''",
    "inf",
    '"""\\\n  b"""',
]
KEYS = ["a", "b-1", '"q.r"', "'s t'", '"\\u0041"', "7"]


@dataclass
class Writer:
    """Writes a text and notes, by counting the line breaks it wrote, where each path came first."""

    draw: st.DrawFn
    text: str = ""
    lines: dict[Path, int] = field(default_factory=dict)
    fresh: int = 0

    def put(self, text: str) -> None:
        self.text += text

    def note(self, path: Path) -> None:
        self.lines.setdefault(path, 1 + self.text.count("\n"))

    def gap(self) -> None:
        self.put(self.draw(st.sampled_from(["", " ", "\n", "  # c ] } \" '\n", "\n\n"])))

    def key(self) -> tuple[str, str]:
        self.fresh += 1
        token = self.draw(st.sampled_from(KEYS))
        if token[0] in "\"'":
            token = f"{token[:-1]}{self.fresh}{token[-1]}"
        else:
            token = f"{token}{self.fresh}"
        return token, next(iter(tomllib.loads(f"{token} = 1")))

    def value(self, path: Path, depth: int) -> None:
        kind = self.draw(st.sampled_from(["scalar", "scalar", "array", "inline"])) if depth < 3 else "scalar"
        if kind == "scalar":
            self.put(self.draw(st.sampled_from(SCALARS)))
        elif kind == "array":
            self.array(path, depth)
        else:
            self.inline(path, depth)

    def array(self, path: Path, depth: int) -> None:
        count = self.draw(st.integers(0, 3))
        self.put("[")
        for place in range(count):
            self.gap()
            self.note((*path, place))
            self.value((*path, place), depth + 1)
            self.gap()
            if place < count - 1 or self.draw(st.booleans()):
                self.put(",")
        self.gap()
        self.put("]")

    def inline(self, path: Path, depth: int) -> None:
        count = self.draw(st.integers(0, 2))
        self.put("{ ")
        for place in range(count):
            self.put(", " if place else "")
            self.pair(path, depth + 1)
        self.put(" }")

    def pair(self, path: Path, depth: int) -> None:
        tokens = [self.key() for _ in range(self.draw(st.integers(1, 2)))]
        for length in range(1, len(tokens) + 1):
            self.note((*path, *(name for _, name in tokens[:length])))
        self.put(self.draw(st.sampled_from([".", " . "])).join(token for token, _ in tokens) + " = ")
        self.value((*path, *(name for _, name in tokens)), depth)

    def body(self, path: Path) -> None:
        self.put("\n")
        for _ in range(self.draw(st.integers(0, 3))):
            self.put(self.draw(st.sampled_from(["", "# note = 1\n", "  "])))
            self.pair(path, 0)
            self.put(self.draw(st.sampled_from(["\n", "  # end\n"])))


@st.composite
def texts(draw: st.DrawFn) -> tuple[str, dict[Path, int]]:
    writer = Writer(draw)
    writer.body(())
    for _ in range(draw(st.integers(0, 3))):
        token, name = writer.key()
        if draw(st.booleans()):
            writer.note((name,))
            writer.put(f"[ {token} ]")
            writer.body((name,))
            continue
        for place in range(draw(st.integers(1, 3))):
            writer.note((name,))
            writer.note((name, place))
            writer.put(f"[[{token}]]")
            writer.body((name, place))
            for inner in range(draw(st.integers(0, 2))):
                writer.note((name, place, "in"))
                writer.note((name, place, "in", inner))
                writer.put(f"[[ {token}.in ]]")
                writer.body((name, place, "in", inner))
    text = writer.text.replace("\n", "\r\n") if draw(st.booleans()) else writer.text
    return text, writer.lines


def paths(value: object, path: Path = ()) -> set[Path]:
    found = {path} if path else set()
    pairs = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    return found.union(*(paths(inner, (*path, key)) for key, inner in pairs))


@settings(max_examples=120, deadline=None, derandomize=True)
@given(texts())
def test_lines_agree_with_the_writer(written: tuple[str, dict[Path, int]]) -> None:
    text, lines = written
    found = line_of_each_path(text)
    assert set(found) == paths(tomllib.loads(text))
    assert dict(found) == lines
