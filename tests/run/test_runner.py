"""The loop on a bench that is only a list: order, ways out, and that nothing begun is lost."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import pytest

from owlight.errors import StopNow, StorageError
from owlight.run.runner import run
from owlight.run.waiting import DemodulationFailedError
from owlight.vocabulary.events import Event, Note, SafeState, SegmentEnded


class Broken:
    """A demodulation that raises."""

    def result(self) -> Any:
        raise DemodulationFailedError("the demodulation stopped with ValueError: no")


def test_stays_follow_the_planned_order(rig: Any) -> None:
    assert run(rig.night).state == "finished"
    taken = [(stay.attempt.point.index, stay.attempt.number) for stay in rig.stays()]
    assert taken == [(2, 1), (0, 1), (3, 1), (1, 1), (1, 2), (3, 2), (0, 2), (2, 2)]
    assert all(stay.outcome == "ok" and stay.received_power is not None for stay in rig.stays())


def test_light_comes_after_dark_work(rig: Any) -> None:
    run(rig.night)
    names = [call[0] for call in rig.bench.calls]
    light = names.index("light")
    assert names.index("wavelength") < names.index("zero") < light
    assert "capture" not in names[:light] and "received power" not in names[:light]


def test_power_is_read_on_both_sides(rig: Any) -> None:
    run(rig.night)
    calls = [call for call in rig.bench.calls if call[0] == "capture" or call[:2] == ("read", "power_meter.power")]
    stays = [call for call in calls if call[0] == "read" or call[2] > 0]  # attempt 0 is the vertical search
    assert [call[-1] if call[0] == "read" else "capture" for call in stays] == ["before", "capture", "after"] * 8


def test_demodulation_lags_by_one_stay(rig: Any) -> None:
    """The next stay is under way before the one before the last is waited for, and answers come in order."""
    seen: list[tuple[int, int]] = []
    rig.bench.spoil = lambda call: (
        seen.append((call[1], len(rig.demodulated))) if call[0] == "capture" and call[2] else None
    )
    run(rig.night)
    assert [waited for _, waited in seen] == [0, 0, 1, 2, 3, 4, 5, 6]
    assert [(c.point, c.attempt) for c in rig.demodulated] == [
        (stay.attempt.point.index, stay.attempt.number) for stay in rig.stays()
    ]


def test_safe_state_comes_before_any_waiting(rig: Any, fail_at: Callable[..., Any]) -> None:
    rig.bench.spoil = fail_at("capture", 5)
    order: list[object] = []
    make_safe = rig.bench.make_safe

    def noted() -> SafeState:
        order.append(len(rig.demodulated))
        return make_safe()

    rig.bench.make_safe = noted
    run(rig.night)
    assert order and order[0] < len(rig.demodulated)


def test_fault_keeps_every_stay_begun(rig: Any, fail_at: Callable[..., Any]) -> None:
    rig.bench.spoil = fail_at("capture", 5)  # one of them is the vertical search's
    outcome = run(rig.night)
    assert outcome.state == "gave up" and "cable fell out" in outcome.reason
    assert [stay.outcome for stay in rig.stays()] == ["ok", "ok", "ok", "failed"]
    assert "cable fell out" in rig.stays()[-1].reason and rig.stays()[-1].readings
    assert rig.names()[-1] == "SegmentEnded" and rig.names().count("SafeState") == 1
    assert any(isinstance(event, Note) and event.severity == "fault" for event in rig.events)


@pytest.mark.parametrize("call", ["set", "wavelength", "zero", "light", "received power", "read", "capture"])
@pytest.mark.parametrize("number", [1, 3])
def test_every_way_out_is_safe(rig: Any, fail_at: Callable[..., Any], call: str, number: int) -> None:
    rig.bench.spoil = fail_at(call, number)
    outcome = run(rig.night)
    happened = sum(done[0] == call for done in rig.bench.calls) >= number
    assert outcome.state == ("gave up" if happened else "finished")
    assert rig.bench.calls[-1] == ("safe",)
    assert isinstance(rig.events[-1], SegmentEnded)


def test_unforeseen_fault_is_safe_and_told(rig: Any, fail_at: Callable[..., Any]) -> None:
    rig.bench.spoil = fail_at("capture", 3, ZeroDivisionError("nobody foresaw this"))
    with pytest.raises(ZeroDivisionError):
        run(rig.night)
    assert rig.bench.calls[-1] == ("safe",)
    assert isinstance(rig.events[-1], SegmentEnded) and rig.events[-1].state == "gave up"


def test_one_request_finishes_the_point(rig: Any) -> None:
    rig.bench.spoil = lambda call: rig.stop.ask() if call == ("capture", 0, 1, 1) else None
    outcome = run(rig.night)
    assert outcome.state == "called off"
    assert [(s.attempt.point.index, s.outcome) for s in rig.stays()] == [(2, "ok"), (0, "ok")]


def test_two_requests_end_it_at_once(rig: Any) -> None:
    def press_twice(call: tuple[object, ...]) -> None:
        if call == ("capture", 0, 1, 1):
            rig.stop.ask()
            rig.stop.ask()

    rig.bench.spoil = press_twice
    taken = rig.night.demodulate_later
    rig.night.demodulate_later = lambda capture: (rig.night.clock.checkpoint(), taken(capture))[1]
    outcome = run(rig.night)
    assert (outcome.state, outcome.reason) == ("called off", "stopped at once by a person")
    # both captures are kept with their stays, none of them waited for
    assert [(s.outcome, len(s.captures)) for s in rig.stays()] == [("failed", 1), ("failed", 1)]
    assert rig.demodulated == []


def test_stop_in_preparation_lights_nothing(rig: Any) -> None:
    def interrupted(call: tuple[object, ...]) -> None:
        if call[0] == "wavelength":
            raise StopNow

    rig.bench.spoil = interrupted
    assert run(rig.night).state == "called off"
    assert [call[0] for call in rig.bench.calls if call[0] in ("light", "safe")] == ["safe"]


def test_repeated_record_is_never_demodulated(rig: Any) -> None:
    """Once the oscilloscope repeats itself its captures fail, and three failures in a row end the night."""

    def trigger_lost(call: tuple[object, ...]) -> None:
        rig.bench.stale = rig.bench.stale or call == ("capture", 3, 1, 1)

    rig.bench.spoil = trigger_lost
    outcome = run(rig.night)
    assert outcome.state == "gave up" and "3 stays in a row" in outcome.reason
    assert [stay.outcome for stay in rig.stays()] == ["ok", "ok"] + ["failed"] * (len(rig.stays()) - 2)
    assert len(rig.demodulated) == 2
    bad = [check for stay in rig.stays() for check in stay.checks if check.finding == "bad"]
    assert {check.name for check in bad} == {"duplicate capture"}


def test_old_record_gives_no_range(rig: Any) -> None:
    rig.bench.stale = True
    rig.night.seen_sha256 |= {lane.sha256 for lane in _record(rig).lanes}
    outcome = run(rig.night)
    assert outcome.state == "gave up" and "old record" in outcome.reason


def _record(rig: Any) -> Any:
    from owlight.vocabulary.captures import CaptureId

    return rig.bench.capture(CaptureId(0, 0, 0), 1, 0.0, rig.night.plan.capture)


def test_broken_demodulation_fails_only_its_stay(rig: Any) -> None:
    """The failed stay is taken again once, at the end."""
    taken, count = rig.night.demodulate_later, [0]

    def second_breaks(capture: Any) -> Any:
        count[0] += 1
        return Broken() if count[0] == 2 else taken(capture)

    rig.night.demodulate_later = second_breaks
    assert run(rig.night).state == "finished"
    assert [stay.outcome for stay in rig.stays()] == ["ok", "failed"] + ["ok"] * 7
    assert rig.stays()[-1].attempt.reason == "retry"
    assert rig.stays()[-1].attempt.point.index == rig.stays()[1].attempt.point.index


def test_failing_storage_leaves_a_dark_bench(rig: Any) -> None:
    """Each record is still tried, so that the side file gets them all."""
    tried: list[Event] = []

    def full(event: Event) -> None:
        tried.append(event)
        if rig.bench.calls and any(call[0] == "capture" for call in rig.bench.calls):
            raise StorageError("The disk is full. Make room.")

    rig.night.emit = full
    with pytest.raises(StorageError):
        run(rig.night)
    assert rig.bench.calls[-1] == ("safe",)
    assert {"SafeState", "SegmentEnded", "AttemptFinished"} <= {type(event).__name__ for event in tried}


def test_captures_can_be_left_out(rig: Any) -> None:
    rig.night.plan = replace(rig.night.plan, capture=None, chain=None)
    assert run(rig.night).state == "finished"
    assert all(stay.captures == () and len(stay.readings) > 2 for stay in rig.stays())
