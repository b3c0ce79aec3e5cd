"""The verb `identify`: who is on the bench; nothing is set."""

from __future__ import annotations

from typing import Any

from owlight.errors import BenchError
from owlight.instrument.instrument import Instrument
from owlight.jobs.bench_session import Surroundings, is_simulated, surroundings
from owlight.jobs.resolve import Resolved, resolve, world_path
from owlight.link import Link, Stamper
from owlight.scpi import may_be, tells_serial
from owlight.vocabulary.events import Event

Json = dict[str, Any]


def identify(bench_name: str) -> Json:
    """One answer a role, also where nobody answers or somebody unexpected does."""
    resolved = resolve(None, bench_name)
    world = world_path(bench_name, resolved.bench) if resolved.simulated else None
    with surroundings(resolved.bench, world) as around:
        found = [_ask(role, resolved, around) for role in resolved.bench.role]
    simulated = resolved.simulated or any(is_simulated(answer["words"]) for answer in found)
    return {"bench": bench_name, "simulated": simulated, "instruments": found}


def _ask(role: str, resolved: Resolved, around: Surroundings) -> Json:
    def unheard(event: Event) -> None:
        """No run, no logbook: what is exchanged here is only shown."""

    stamper = Stamper(around.clock)
    link = Link(role, around.resources[role], unheard, around.clock)
    planned = resolved.bench.role[role].serial_number
    try:
        link.open()
        found = Instrument(role, resolved.drivers[role], link, unheard, stamper, around.clock).identify()
    except BenchError as trouble:
        return _answer(role, around, "no answer", False, str(trouble))
    finally:
        link.close()
    who = f"{found.maker}, {found.model}, serial {found.serial_number}, firmware {found.firmware}"
    if not may_be(found.serial_number, planned):
        return _answer(role, around, "another instrument", False, f"{who}; the bench file expects serial {planned}")
    if planned and not tells_serial(found.serial_number):
        who += f"; that it is {planned} rests on the bench file alone"
    return _answer(role, around, "as planned", True, who)


def _answer(role: str, around: Surroundings, answer: str, as_planned: bool, words: str) -> Json:
    return {
        "role": role,
        "resource": around.resources[role],
        "answer": answer,
        "as_planned": as_planned,
        "words": words,
    }
