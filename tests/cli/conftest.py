"""Commands in this process: arguments in, status and words out."""

from __future__ import annotations

import sys
from collections.abc import Callable
from dataclasses import dataclass

import pytest

from owlight.cli import main


@dataclass(frozen=True)
class Answer:
    status: int
    out: str
    err: str


Owlight = Callable[..., Answer]


@pytest.fixture
def owlight(monkeypatch: pytest.MonkeyPatch, capfd: pytest.CaptureFixture[str]) -> Owlight:
    def ask(*arguments: object) -> Answer:
        monkeypatch.setattr(sys, "argv", ["owlight", *map(str, arguments)])
        with pytest.raises(SystemExit) as end:
            main()
        assert isinstance(end.value.code, int)
        return Answer(end.value.code, *capfd.readouterr())

    return ask
