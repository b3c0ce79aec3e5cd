"""What is measured next, and that a night cut short decides like a whole one."""

from __future__ import annotations

from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from owlight.plan import capped, next_attempt
from owlight.vocabulary.captures import CaptureId, Demodulation, Tributary
from owlight.vocabulary.events import AttemptFinished, History
from owlight.vocabulary.plan import Attempt, CaptureRequest, Plan, Point, StopRule
from owlight.vocabulary.seeds import seed_for
from owlight.vocabulary.values import Setting, Stamp, Term

AT = Stamp("2026-01-01T00:00:00.000000Z", 0.0, 0)
BITS = 100_000


def plan(stop: StopRule, points: int = 3, reference: bool = False, capture: bool = True) -> Plan:
    found = [Point(i, (Setting(Term("bench", "received_power"), -40.0 + i),)) for i in range(points)]
    order = [tuple(range(points)) for _ in range(stop.passes)]
    if reference:
        found.append(Point(points, (), reference=True))
        order = [(points, *indices) for indices in order]
    request = CaptureRequest(1000, 80e9, 2560, ("XI", "XQ", "YI", "YQ"), "fixed", "all") if capture else None
    return Plan(
        name="p",
        sources=(),
        seed=1,
        simulated=True,
        measurand=None,
        signal=None,
        settings=(),
        conditions=(),
        points=tuple(found),
        order=tuple(order),
        readings=(),
        capture=request,
        chain=None,
        stop=stop,
        highest_power=(),
        stay_s=10.0,
        forecast_s=0.0,
        forecast_bytes=0,
    )


def finished(attempt: Attempt, errors: int | None, outcome: str = "ok") -> AttemptFinished:
    """`errors` in each capture, None for no lock."""
    found = []
    for number in range(1, attempt.captures + 1):
        identifier = CaptureId(attempt.point.index, attempt.number, number)
        tributaries = () if errors is None else (Tributary("XI", BITS, errors),)
        status = "no lock" if errors is None else "locked"
        found.append(Demodulation(identifier, "", status, "", tributaries, None, None, None, (), 0.0))
    kept = tuple(found) if outcome == "ok" else ()
    return AttemptFinished(AT, attempt, outcome, "", AT, 1.0, None, (), (), kept, ())


def answer(attempt: Attempt, luck: int) -> AttemptFinished:
    """What the bench would give at this stay, whatever happened before: a pure function of the stay."""
    draw = seed_for(luck, "answer", attempt.point.index, attempt.number) % 100
    if draw < 15:
        return finished(attempt, None, "failed")
    return finished(attempt, None if draw < 25 else (0, 3, 150)[attempt.point.index % 3])


def whole_night(one: Plan, luck: int, start: History = ()) -> list[Attempt]:
    """As the loop does it: the latest stay is still being demodulated when the next one is chosen."""
    history = list(start)
    chosen: list[Attempt] = []
    waiting: Attempt | None = None
    while True:
        known = [*history, finished(waiting, None)] if waiting else history
        attempt = next_attempt(one, tuple(known))
        if attempt is None and waiting is None:
            return chosen
        if waiting is not None:
            history.append(answer(waiting, luck))
        waiting = attempt
        chosen += [attempt] if attempt else []


@settings(max_examples=25, deadline=None, derandomize=True)
@given(
    st.integers(0, 10**6),
    st.integers(1, 7),
    st.integers(1, 2),
    st.sampled_from([None, 200, 1000]),
    st.sampled_from([None, 250_000]),
    st.booleans(),
)
def test_resumed_at_every_cut_equals_uninterrupted(
    luck: int, passes: int, captures: int, errors: int | None, bits: int | None, reference: bool
) -> None:
    one = plan(StopRule(passes, captures, errors, bits), reference=reference)
    night = whole_night(one, luck)
    for cut in range(len(night) + 1):
        before = tuple(answer(attempt, luck) for attempt in night[:cut])
        assert whole_night(one, luck, before) == night[cut:]


def test_latest_stay_is_never_looked_at() -> None:
    one = plan(StopRule(3, 1, errors=200))
    history: History = ()
    for _ in range(5):
        attempt = next_attempt(one, history)
        assert attempt is not None
        blind = next_attempt(one, (*history, finished(attempt, None)))
        assert blind == next_attempt(one, (*history, finished(attempt, 10**6)))
        history = (*history, finished(attempt, 150))


def stays(one: Plan, errors: list[int | None]) -> list[tuple[int, int, str]]:
    """Point, number and reason of every stay, with so many errors at each point."""
    history: History = ()
    found = []
    while (attempt := next_attempt(one, history)) is not None:
        history = (*history, finished(attempt, errors[attempt.point.index]))
        found.append((attempt.point.index, attempt.number, attempt.reason))
        assert len(found) < 1000
    return found


def test_passes_follow_the_order() -> None:
    one = replace(plan(StopRule(2, 1)), order=((2, 0, 1), (1, 2, 0)))
    assert [point for point, _, _ in stays(one, [None] * 3)] == [2, 0, 1, 1, 2, 0]


def test_enough_errors_cap_a_point() -> None:
    one = plan(StopRule(5, 1, errors=200))
    numbers = [point for point, _, _ in stays(one, [150, 20, 1000])]
    assert [numbers.count(point) for point in range(3)] == [2, 5, 1]


def test_enough_bits_cap_a_point() -> None:
    one = plan(StopRule(9, 2, bits=500_000))
    # Two captures of 100,000 bits a stay: the third stay reaches it. Of the last point it is the latest stay of all
    # when the next is chosen, which is not looked at, so that point gets one more.
    numbers = [point for point, _, _ in stays(one, [50] * 3)]
    assert [numbers.count(point) for point in range(3)] == [3, 3, 4]


def test_hopeless_point_is_capped_at_five_captures() -> None:
    one = plan(StopRule(20, 1))
    numbers = [point for point, _, _ in stays(one, [0, 1, 0])]
    # one error a capture promises twenty, which is enough to go on
    assert [numbers.count(point) for point in range(3)] == [5, 20, 5]


def test_captures_without_lock_cap_nothing() -> None:
    assert len(stays(plan(StopRule(20, 1)), [None] * 3)) == 60


def test_reference_is_never_capped() -> None:
    found = stays(plan(StopRule(8, 1, errors=10), reference=True), [50, 50, 50, 1000])
    assert [each for each in found if each[2] == "reference"] == [(3, number, "reference") for number in range(1, 9)]


def test_fired_rule_is_told() -> None:
    one = plan(StopRule(9, 1, errors=200))
    done = tuple(finished(Attempt(one.points[0], number, 1, "pass", 0.0), 150) for number in (1, 2, 3, 4))
    assert capped(one, done) == {0: "450 errors counted, 200 wanted"}
    assert capped(one, ()) == {}


def test_failed_stay_is_repeated_once_at_the_end() -> None:
    one = plan(StopRule(1, 1))
    history: History = ()
    found = []
    while (attempt := next_attempt(one, history)) is not None:
        history = (*history, finished(attempt, None, "failed" if attempt.point.index != 1 else "ok"))
        found.append((attempt.point.index, attempt.number, attempt.reason))
    assert found == [(0, 1, "pass"), (1, 1, "pass"), (2, 1, "pass"), (0, 2, "retry"), (2, 2, "retry")]


def test_planned_time_depends_on_the_plan_alone() -> None:
    one = plan(StopRule(5, 1, errors=200))
    times: dict[tuple[int, int], set[float]] = {}
    for luck in range(6):
        for attempt in whole_night(one, luck):
            if attempt.reason == "pass" and attempt.number == 1:
                times.setdefault((attempt.point.index, 1), set()).add(attempt.planned_time_s)
    assert {key: len(found) for key, found in times.items()} == {(0, 1): 1, (1, 1): 1, (2, 1): 1}
    assert sorted(time_s for found in times.values() for time_s in found) == [60.0, 70.0, 80.0]


def test_skipped_stay_leaves_later_times_alone() -> None:
    full = plan(StopRule(2, 1))
    short = plan(StopRule(2, 1, errors=1))
    last = [attempt for attempt in _all(short, [5, 0, 0]) if attempt.point.index == 2][-1]
    assert last == [attempt for attempt in _all(full, [0, 0, 0]) if attempt.point.index == 2][-1]


def _all(one: Plan, errors: list[int]) -> list[Attempt]:
    history: History = ()
    while (attempt := next_attempt(one, history)) is not None:
        history = (*history, finished(attempt, errors[attempt.point.index]))
    return [done.attempt for done in history]


def test_no_capture_means_no_captures() -> None:
    attempt = next_attempt(plan(StopRule(1, 4), capture=False), ())
    assert attempt is not None and attempt.captures == 0


@pytest.mark.parametrize("reason", ["remeasure", "search"])
def test_stays_of_others_keep_their_numbers(reason: str) -> None:
    one = plan(StopRule(1, 1))
    other = finished(Attempt(one.points[0], 1, 1, reason, 0.0), 5)
    attempt = next_attempt(one, (other,))
    assert attempt is not None
    assert (attempt.point.index, attempt.number, attempt.reason) == (0, 2, "pass")
