"""An independent validator gives the same verdict on files that are a little wrong."""

from __future__ import annotations

import re
import tomllib
from dataclasses import dataclass
from typing import Annotated, Literal

from hypothesis import given, settings
from hypothesis import strategies as st
from pydantic import BaseModel, BeforeValidator, ConfigDict, Field, ValidationError

from owlight.reader import Within, read


@dataclass(frozen=True)
class Pulse:
    shape: Literal["root raised cosine"]
    rolloff: Annotated[float, Within(0.0, 1.0)] = 0.1


@dataclass(frozen=True)
class File:
    name_: str
    power_dbm: float
    loss_db: float = 0.0
    symbols: int = 1
    on: bool = False
    pulse: Pulse | None = None
    counts: tuple[int, ...] = ()


def _only(pattern: str) -> BeforeValidator:
    def check(value: object) -> object:
        if not isinstance(value, str) or not re.fullmatch(pattern, value):
            raise ValueError("not this quantity")
        return float(value.split()[0])

    return BeforeValidator(check)


class Strict(BaseModel):
    model_config = ConfigDict(extra="forbid", strict=True, allow_inf_nan=False)


class RefereePulse(Strict):
    shape: Literal["root raised cosine"]
    rolloff: float = Field(0.1, ge=0.0, le=1.0)


class Referee(Strict):
    name: str
    power: Annotated[float, _only(r"-?\d+(\.\d+)? dBm|\d+(\.\d+)? mW")]
    loss: Annotated[float, _only(r"-?\d+(\.\d+)? dB")] = 0.0
    symbols: int = 1
    on: bool = False
    pulse: RefereePulse | None = None
    counts: list[int] = []


VALUES = st.sampled_from(
    """
    "x" | "-3 dBm" | "2 mW" | "3 dB" | "3" | 3 | 0.5 | 1.5 | true | [1, 2] | [1, true] | [] | nan | {}
    { shape = "root raised cosine" } | { shape = 1 } | { shape = "root raised cosine", rolloff = 2 }
    """.strip()
    .replace("\n", "|")
    .split("|")
)
GOOD = {"name": '"x"', "power": '"-3 dBm"', "loss": '"3 dB"', "symbols": "3", "on": "true", "counts": "[1, 2]"}
GOOD["pulse"] = '{ shape = "root raised cosine", rolloff = 0.5 }'


@st.composite
def files(draw: st.DrawFn) -> str:
    """A right file with up to three keys spoilt, dropped or misspelt."""
    pairs = dict(GOOD)
    for key in draw(st.lists(st.sampled_from(sorted(GOOD)), max_size=3, unique=True)):
        what = draw(st.sampled_from(["value", "value", "value", "drop", "misspell"]))
        value = pairs.pop(key)
        if what == "value":
            pairs[key] = draw(VALUES)
        elif what == "misspell":
            pairs[f"{key}e"] = value
    return "".join(f"{key} = {value}\n" for key, value in pairs.items())


@settings(max_examples=150, deadline=None, derandomize=True)
@given(files())
def test_verdict_agrees_with_the_referee(text: str) -> None:
    document = read(text, "f.toml", File)
    try:
        Referee.model_validate(tomllib.loads(text))
        accepted = True
    except ValidationError:
        accepted = False
    assert accepted == (not document.problems), (text, document.problems)
