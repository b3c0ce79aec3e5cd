"""What instruments do where the light behind them says no."""

from __future__ import annotations

from typing import Any

import pytest


def test_impossible_record_is_a_conflict(bench: Any, monkeypatch: pytest.MonkeyPatch) -> None:
    """A record that the optics refuse must not end the instrument's thread."""

    def refuse(*_: object) -> None:
        raise ValueError("a record so slow would hold more light than fits a memory")

    monkeypatch.setattr(bench.light.physics, "capture_codes", refuse)
    bench.ask("oscilloscope", "INIT")
    assert bench.ask("oscilloscope", "SYST:ERR?").startswith('-221,"Settings conflict')
    assert bench.ask("oscilloscope", "*IDN?")
