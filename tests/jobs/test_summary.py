"""What a run says of itself: points without any stay, curves without a conclusion."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from owlight.errors import InputError
from owlight.jobs.bench_session import simulated_resources
from owlight.jobs.planning import plan_of
from owlight.jobs.reproduce import unpack
from owlight.jobs.resolve import Resolved, resolve
from owlight.jobs.summary import _readings, _stays
from owlight.vocabulary.events import AttemptFinished
from owlight.vocabulary.plan import Attempt, Plan
from owlight.vocabulary.terms import RECEIVED_POWER
from owlight.vocabulary.values import Reading, Stamp, Term


@pytest.fixture(scope="module")
def resolved() -> Resolved:
    return resolve("qpsk_sensitivity", "bench")


def stay(plan: Plan, point: int, outcome: str) -> AttemptFinished:
    at = Stamp("2026-01-01T00:00:00Z", 0.0, 1)
    attempt = Attempt(plan.points[point], 1, 1, "pass", 0.0)
    return AttemptFinished(at, attempt, outcome, "", at, 1.0, None, (), (), (), ())


def test_points_without_ok_stay_are_missing(resolved: Resolved) -> None:
    plan = plan_of(resolved)
    measured = [stay(plan, index, "ok") for index in range(len(plan.points)) if index not in (3, 5)]
    told = _stays(plan, (*measured, stay(plan, 3, "failed"), stay(plan, 0, "failed")), 31)
    assert told == {"stays_planned": 31, "stays_done": len(measured), "stays_failed": 2, "missing": [3, 5]}


def test_readings_are_told_a_stay(resolved: Resolved) -> None:
    """Mean and deviation of before and after, with units; a failed stay and one that read nothing give none."""
    plan = plan_of(resolved)
    at, meter = Stamp("2026-01-01T00:00:00Z", 0.0, 1), Term("power_meter", "power")
    read = (Reading(at, meter, 2e-6, None, 1, "before"), Reading(at, meter, 4e-6, None, 1, "after"))
    told = _readings(
        (
            replace(stay(plan, 3, "ok"), readings=read),
            replace(stay(plan, 4, "failed"), readings=read),
            stay(plan, 5, "ok"),
        )
    )
    power_dbm = plan.points[3].value(RECEIVED_POWER)
    assert told == [
        {
            "point": 3,
            "attempt": 1,
            "settings": [{"term": "received_power", "value": power_dbm, "unit": "dBm"}],
            # 1e-6 off the mean on either side: the square root of 2 in 1e-6
            "readings": [{"term": "power_meter.power", "value": 3e-6, "unit": "W", "sd": pytest.approx(2**0.5 * 1e-6)}],
        }
    ]


def test_every_source_is_unpacked_as_it_was(resolved: Resolved, tmp_path: Path) -> None:
    """A lab folder from the logbook's texts resolves to the same texts."""
    plan = plan_of(resolved)
    sequence, bench = unpack(plan.sources, tmp_path)
    again = plan_of(resolve(str(sequence), str(bench)))
    named = {(s.kind, s.name): s.sha256 for s in plan.sources}
    assert named == {(s.kind, s.name): s.sha256 for s in again.sources}
    assert {kind for kind, _ in named} >= {"sequence", "bench", "world", "instrument", "driver"}
    assert replace(again, sources=plan.sources) == plan


def test_real_address_on_a_simulated_bench_is_refused(resolved: Resolved) -> None:
    """Simulated time does not pass for a real instrument, so waits would be skipped."""
    laser = replace(resolved.bench.role["signal_laser"], resource="TCPIP::192.0.2.1::INSTR")
    mixed = replace(resolved.bench, role={**resolved.bench.role, "signal_laser": laser})
    served = {role: {"hislip": "a", "socket": "b"} for role in mixed.role}
    with pytest.raises(InputError, match=r"signal_laser.*not served by the simulated bench"):
        simulated_resources(mixed, served)
    assert set(simulated_resources(resolved.bench, served).values()) == {"a", "b"}
