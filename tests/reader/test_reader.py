"""What the reader accepts, refuses and says."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Annotated, Any, Literal

import pytest

from owlight.reader import Document, Within, key_of, read


@dataclass(frozen=True)
class Axis:
    setting: str
    from_dbm: float | None = None
    values_db: tuple[float, ...] = ()


@dataclass(frozen=True)
class Limit:
    highest_dbm: float


@dataclass(frozen=True)
class Night:
    night: str
    format_version: Literal[1]
    sweep: tuple[Axis, ...] = ()
    symbol_rate_bd: float = 1.0
    rolloff: Annotated[float, Within(0.0, 1.0)] = 0.1
    span_nm: Annotated[float | None, Within(1500.0, 1600.0)] = None
    symbols: int = 1
    keep: Literal["all", "none"] = "all"
    simulated: bool = False
    limit: dict[str, Limit] = field(default_factory=dict)
    settings: dict[str, Any] = field(default_factory=dict)
    expected: bool | float | str | None = None
    name_: str = ""


GOOD = """
night = "one"
format_version = 1
symbol_rate = "32 GBd"
expected = 3
name = "x"
span = "193.4 THz"
[[sweep]]
setting = "received_power"
from = "1 mW"
values = ["-1 dB", "2 dB"]
[limit."receiver signal input"]
highest = "3 dBm"
[settings]
"signal_laser.wavelength" = "1550.12 nm"
"""

EIGHT_MISTAKES = """\
night = 7
format_version = 1
symbol_rate = 32
rolof = 0.1
symbols = true
keep = "al"
[[sweep]]
setting = "received_power"
from = "-41 dB"
[[sweep]]
values = ["0.5 dB",
  "3 dBm"]
[limit.x]
"""


def night(text: str) -> Document[Night]:
    return read(text, "night.toml", Night)


def test_good_file_becomes_its_model() -> None:
    document = night(GOOD)
    assert document.problems == ()
    value = document.value
    assert value is not None
    assert value.sweep == (Axis("received_power", 0.0, (-1.0, 2.0)),)
    assert value.symbol_rate_bd == 32e9
    assert value.limit == {"receiver signal input": Limit(3.0)}
    assert value.settings == {"signal_laser.wavelength": "1550.12 nm"}
    assert (value.expected, value.name_) == (3.0, "x")


def test_all_mistakes_come_at_once() -> None:
    found = [(problem.line, problem.key) for problem in night(EIGHT_MISTAKES).problems]
    assert found == [
        (1, "night"),
        (3, "symbol_rate"),
        (4, "rolof"),
        (5, "symbols"),
        (6, "keep"),
        (9, "sweep[1].from"),
        (10, "sweep[2].setting"),
        (12, "sweep[2].values[2]"),
        (13, "limit.x.highest"),
    ]


@pytest.mark.parametrize(
    ("line", "words"),
    [
        ("rolof = 0.1", 'unknown key; did you mean "rolloff"? Allowed here: night, format_version, sweep, symbol_rate'),
        ('keep = "al"', "'al' is not allowed; did you mean \"all\"? Allowed: all, none"),
        ("symbol_rate = 32", "32 has no unit; write a symbol rate (Bd) in quotes"),
        ("symbols = 2.0", "2.0 is not a whole number; write a whole number"),
        ("simulated = 1", "1 is not true or false; write true or false"),
        ("rolloff = 1.5", "1.5 is outside 0 to 1"),
        ("rolloff = nan", "nan is not a number"),
        ("sweep = 3", "3 stands where a list is needed: [ ... ] of a table"),
        ("limit = [1]", "a list stands where a table is needed"),
        ('span = "1700 nm"', "1700 nm is outside 1500 nm to 1600 nm"),
        ('symbol_rate = "1e400 Bd"', "beyond all numbers"),
        ("expected = [1]", "a list is not allowed; write true or false or a number or a string"),
    ],
)
def test_words_say_what_is_allowed(line: str, words: str) -> None:
    (problem,) = night(f'night = "one"\nformat_version = 1\n{line}\n').problems
    assert words in problem.words
    assert problem.line == 3


def test_level_for_ratio_says_so() -> None:
    document = night('night="n"\nformat_version=1\n[[sweep]]\nsetting="s"\nvalues=["3 dBm"]\n')
    assert "'3 dBm' is a level (dBm or W), but a ratio (dB) is needed here" in str(document.problems[0])


def test_wrong_optional_part_is_left_out() -> None:
    document = night('night="n"\nformat_version=1\nsymbols="x"\nrolloff=0.2\n')
    assert document.value is not None
    assert (document.value.symbols, document.value.rolloff) == (1, 0.2)
    assert document.holds(("symbols",)) and not document.holds(("keep",))


def test_missing_required_part_gives_nothing() -> None:
    document = night("format_version = 1\n")
    assert document.value is None
    assert document.problems[0].words == "is missing; it needs a string"


@pytest.mark.parametrize(
    ("text", "line"),
    [
        ('a = 1\nb = = 2\nc = "x', 2),
        ("a = 1\na = 2\n", 2),
        ('\n\nx = "open', 3),
        ("x = [1,\n2\n", 2),
        ("[a]\n[a]\n", 2),
    ],
)
def test_broken_syntax_is_one_problem_with_line(text: str, line: int) -> None:
    document = night(text)
    assert document.value is None
    (problem,) = document.problems
    assert problem.line == line
    assert problem.words.startswith("not TOML: ")


@pytest.mark.parametrize(
    "text",
    [
        "x = " + "[" * 3000 + "]" * 3000,
        "x = " + "{a=" * 1500 + "1" + "}" * 1500,
        "x = " + "9" * 5000,
        "y = " + ".".join("a" * 5000) + " = 1",
        "#" * 2_000_000,
        ".".join("a" * 3900) + " = 1\n",
        "\x00",
    ],
)
def test_hostile_text_is_refused_not_raised(text: str) -> None:
    assert night(text).problems
    broken = "\n".join(text[at : at + 7000] for at in range(0, min(len(text), 40_000), 7000))
    assert night(broken).problems


def test_problem_finds_nearest_line_above() -> None:
    document = night(GOOD)
    assert document.problem(("sweep", 0, "step"), "w").line == 8
    assert document.problem(("settings", "signal_laser.wavelength"), "w").line == 15
    assert document.problem(("nothing",), "w").line is None


def test_unit_in_name_leaves_key() -> None:
    assert [key_of(name) for name in ("noise_db_per_hz", "from_dbm", "rate_b_per_s", "rolloff")] == [
        "noise",
        "from",
        "rate",
        "rolloff",
    ]
