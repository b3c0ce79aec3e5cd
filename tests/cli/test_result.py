"""What a person reads of a run, on the way and at its end."""

from __future__ import annotations

import io
from typing import Any

import pytest

from owlight.cli.progress import Progress
from owlight.cli.result import print_reproduction, print_result
from owlight.vocabulary.events import AttemptFinished, ReceivedPower
from owlight.vocabulary.plan import Attempt, Plan, Point, StopRule
from owlight.vocabulary.terms import RECEIVED_POWER
from owlight.vocabulary.values import Setting, Stamp, Term

ATTENUATION = Term("attenuator", "attenuation")


def readings(point: int, attempt: int, attenuation_db: float, power_w: float | None) -> dict[str, Any]:
    return {
        "point": point,
        "attempt": attempt,
        "settings": [{"term": "attenuator.attenuation", "value": attenuation_db, "unit": "dB"}],
        "readings": [{"term": "power_meter.power", "value": power_w, "unit": "W", "sd": None}],
    }


def told(**other: Any) -> dict[str, Any]:
    """A finished run of readings alone."""
    found: dict[str, Any] = dict.fromkeys(("threshold", "safe_state", "modulation"))
    found |= {
        "simulated": True,
        "simulated_time": True,
        "sequence": "a log",
        "run_id": "1234567890",
        "logbook": "log/l",
    }
    found |= {"state": "finished", "reason": "", "words": "No captures.", "stays_done": 3, "stays_planned": 3}
    found |= {"started_utc": "2026-12-01T20:00:00.000000Z", "ended_utc": "2026-12-01T20:05:00.000000Z"}
    found |= {"stays_failed": 0, "points": [], "sensitivities": [], "missing": [], "findings": [], "penalties": []}
    found["readings"] = [readings(0, 1, 15.0, 12e-6), readings(1, 1, 16.0, None), readings(0, 2, 15.0, 14e-6)]
    return found | other


def test_readings_are_shown_a_row_a_point(capsys: pytest.CaptureFixture[str]) -> None:
    print_result(told(), None)
    out = capsys.readouterr().out
    rows = [line.split() for line in out.splitlines() if "power_meter.power" in line or " dB " in line]
    assert rows[0] == ["attenuator.attenuation", "stays", "power_meter.power"]
    assert rows[1:] == [["15", "dB", "2", "13", "µW"], ["16", "dB", "1", "no", "number"]]
    assert "ended 2026-12-01 20:05:00" in out.replace("T", " ") and "(simulated bench time)" in out


def test_real_time_is_not_called_simulated(capsys: pytest.CaptureFixture[str]) -> None:
    print_result(told(simulated=False, simulated_time=False), None)
    out = capsys.readouterr().out
    assert "simulated" not in out.lower() and "20:05:00Z" in out


@pytest.mark.parametrize("simulated", [True, False])
def test_reproduction_says_what_it_is(capsys: pytest.CaptureFixture[str], simulated: bool) -> None:
    found = {"simulated": simulated, "identical": True, "captures_compared": 2, "readings_compared": 4}
    found |= {"differences": [], "sensitivity_original": None, "sensitivity_reproduced": None, "safe_state": None}
    print_reproduction(found)
    assert ("SIMULATED, not a measurement of hardware" in capsys.readouterr().out) is simulated


def stay(point: Point, power: ReceivedPower | None, reason: str = "") -> AttemptFinished:
    at = Stamp("2026-12-01T20:00:00Z", 0.0, 1)
    outcome = "failed" if reason else "ok"
    return AttemptFinished(at, Attempt(point, 1, 0, "pass", 0.0), outcome, reason, at, 1.0, power, (), (), (), ())


@pytest.mark.parametrize(
    ("settings", "power_dbm", "words"),
    [
        ((Setting(ATTENUATION, 15.0),), None, "attenuator.attenuation 15 dB"),
        ((Setting(RECEIVED_POWER, -38.5),), None, "-38.5 dBm asked"),
        ((Setting(RECEIVED_POWER, -38.5),), -38.512, "-38.512 dBm"),
        ((), None, "point 4"),
    ],
)
def test_progress_names_the_settings(settings: tuple[Setting, ...], power_dbm: float | None, words: str) -> None:
    point, stream = Point(4, settings), io.StringIO()
    plan = Plan(
        "a log", (), 1, True, None, None, (), (), (point,), ((0,),), (), None, None, StopRule(1, 1), (), 1.0, 1.0, 1
    )  # fmt: skip
    asked = None if power_dbm is None else ReceivedPower(-38.5, 30.0, 30.0, None, None, None, None, power_dbm, None)
    Progress(stream).show(plan, stay(point, asked))
    assert stream.getvalue().split("  ", 2)[-1].strip().endswith(words)
