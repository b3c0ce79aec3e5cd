"""Ways out that a review found open."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import Future
from dataclasses import replace
from typing import Any

import pytest

from owlight.errors import SafetyRefusal, StopNow
from owlight.run import waiting
from owlight.run.runner import run
from owlight.vocabulary.values import Reading, Term


def test_hanging_demodulation_yields_to_a_stop(rig: Any) -> None:
    rig.stop.ask(at_least=2)
    with pytest.raises(StopNow):
        waiting._Asked(Future(), rig.night.clock.checkpoint).result()


def test_hanging_demodulation_is_given_up(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(waiting, "LONGEST_WAIT_S", 0.15)
    with pytest.raises(waiting.DemodulationFailedError, match="gave no answer"):
        waiting._Asked(Future(), lambda: None).result()


def test_refusal_in_the_night_keeps_its_words(rig: Any, fail_at: Callable[..., Any]) -> None:
    rig.bench.spoil = fail_at("received power", 4, SafetyRefusal("The photodiode would see 9 dBm."))
    outcome = run(rig.night)
    assert outcome.refused and "9 dBm" in outcome.reason
    assert rig.stays()[-1].outcome == "failed" and "9 dBm" in rig.stays()[-1].reason
    assert rig.bench.calls[-1] == ("safe",)


def test_stay_without_tap_fails(rig: Any, monkeypatch: pytest.MonkeyPatch) -> None:
    """A power from one side of the captures would be another measurand than the others'."""
    read = rig.bench.read

    def silent_after(term: Term, count: int = 1, phase: str = "") -> Reading:
        found: Reading = read(term, count, phase)
        return replace(found, value=None) if phase == "after" else found

    monkeypatch.setattr(rig.bench, "read", silent_after)
    run(rig.night)
    stays = rig.stays()
    assert stays and all(stay.outcome == "failed" and "no number" in stay.reason for stay in stays)
    assert all(stay.received_power.received_power_dbm is None for stay in stays)


def test_early_request_lights_nothing(rig: Any) -> None:
    rig.stop.ask()
    outcome = run(rig.night)
    assert outcome.state == "called off" and outcome.safe_state is not None
    assert not [call for call in rig.bench.calls if call[0] == "light"]


def test_readings_before_have_their_own_key(rig: Any) -> None:
    announced: list[tuple[int, int]] = []
    rig.night.announce = lambda seed, planned_time_s: announced.append((seed, len(rig.bench.calls)))
    run(rig.night)
    first_before = next(i for i, call in enumerate(rig.bench.calls) if call[0] == "read" and call[2] == "before")
    assert announced and max(at for _, at in announced if at <= first_before) == first_before
