"""Plans made from the shipped files, changed where a test says so."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from owlight.bench import Bench, read_bench
from owlight.driver import Driver, read_driver
from owlight.plan import PlanRequest, make_plan
from owlight.sequence import Sequence, read_sequence
from owlight.vocabulary.plan import Plan

ROOT = Path(__file__).parents[2]
PlanOf = Callable[..., Plan]


def sequence_of(text: str) -> Sequence:
    document = read_sequence(text, "sequence.toml")
    assert document.problems == ()
    assert document.value is not None
    return document.value


def bench_of(changes: dict[str, str]) -> Bench:
    text = (ROOT / "simulated_instruments" / "bench.toml").read_text("utf-8")
    for old, new in changes.items():
        assert text.count(old) == 1, old
        text = text.replace(old, new)
    document = read_bench(text, "bench.toml")
    assert document.problems == ()
    assert document.value is not None
    return document.value


@pytest.fixture(scope="session")
def drivers() -> dict[str, Driver]:
    found = {}
    for role, entry in bench_of({}).role.items():
        path = ROOT / "drivers" / f"{entry.driver}.toml"
        document = read_driver(path.read_text("utf-8"), path.name)
        assert document.problems == ()
        assert document.value is not None
        found[role] = document.value
    return found


@pytest.fixture
def plan_of(drivers: dict[str, Driver]) -> PlanOf:
    """A plan of a shipped sequence, with texts replaced in it and in the bench."""

    def make(name: str, changes: dict[str, str] | None = None, bench: dict[str, str] | None = None) -> Plan:
        text = (ROOT / "sequences" / f"{name}.toml").read_text("utf-8")
        for old, new in (changes or {}).items():
            assert text.count(old) == 1, old
            text = text.replace(old, new)
        sequence, paper = sequence_of(text), bench_of(bench or {})
        resources = {role: f"TCPIP::127.0.0.1::{5000 + place}::SOCKET" for place, role in enumerate(paper.role)}
        request = PlanRequest(sequence, paper, drivers, (), None, sequence.seed, True, resources)
        return make_plan(request)

    return make
