"""A bench in this process: our links and instruments on one side, the simulated instruments' engine on the other."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path

import pytest

from owlight import shipped
from owlight.bench import Bench, read_bench
from owlight.driver import Driver, read_driver
from owlight.instrument.instrument import Instrument
from owlight.instrument.open_bench import OpenBench, open_bench
from owlight.link import Link, Stamper, memory_opener
from owlight.simulation.device.bench_time import BenchTime
from owlight.simulation.device.exchange import Exchange
from owlight.simulation.device.model import read_instrument
from owlight.simulation.instruments.build import build
from owlight.simulation.physics import StandIn
from owlight.vocabulary.events import Event
from owlight.vocabulary.terms import ROLES

Spoil = Callable[[bytes], bytes | None]
"""Program message -> its response, or None to let the instrument answer."""


class StepClock:
    """The simulated bench's time as a clock of ours."""

    def __init__(self, time: BenchTime) -> None:
        self.time = time

    def utc(self) -> str:
        return f"2026-01-01T00:00:{self.time.now_s():09.6f}Z"

    def monotonic_s(self) -> float:
        return self.time.now_s()

    def sleep(self, seconds: float) -> None:
        with self.time.lock:
            self.time.advance(seconds)


def load_driver(name: str) -> Driver:
    path = shipped.find("drivers", name)
    driver = read_driver(path.read_text("utf-8"), str(path)).value
    assert driver is not None
    return driver


@dataclass
class Joined:
    """Everything of one bench in memory; `spoil` may answer in place of a role."""

    drivers: Mapping[str, Driver]
    paper: Bench
    spoil: dict[str, Spoil] = field(default_factory=dict)
    heard: list[tuple[str, str]] = field(default_factory=list)
    events: list[Event] = field(default_factory=list)

    def __post_init__(self) -> None:
        files = {}
        for role in ROLES:
            path = shipped.find("simulated_instruments", self.drivers[role].driver.removeprefix("generic_"))
            files[role] = read_instrument(path.read_text("utf-8"), str(path)).value
        self.time = BenchTime(True)
        serials = {role: self.paper.role[role].serial_number for role in ROLES}
        self.simulated, self.truth = build(files, serials, StandIn(), self.time)
        self.clock = StepClock(self.time)
        self.resources = {role: f"memory {role}" for role in ROLES}
        self.opener = memory_opener({self.resources[role]: self._answer(role) for role in ROLES})

    def _answer(self, role: str) -> Callable[[bytes], bytes]:
        exchange = Exchange(self.simulated[role])

        def answer(message: bytes) -> bytes:
            self.heard.append((role, message.decode()))
            spoilt = self.spoil[role](message) if role in self.spoil else None
            return b"".join(exchange.write(message + b"\n")) if spoilt is None else spoilt

        return answer

    def instrument(self, role: str) -> Instrument:
        stamper = Stamper(self.clock)
        link = Link(role, self.resources[role], self.events.append, self.clock, self.opener, stamper=stamper)
        link.open()
        return Instrument(role, self.drivers[role], link, self.events.append, stamper, self.clock)

    def open(self, locks: Path) -> OpenBench:
        return open_bench(
            self.paper,
            self.drivers,
            self.resources,
            self.events.append,
            self.clock,
            opener=self.opener,
            lock_folder=locks,
        )


def join(**replaced: str) -> Joined:
    """The demo bench; `role="driver name"` replaces the instrument of a role by one that speaks a dialect."""
    path = shipped.find("simulated_instruments", "bench")
    paper = read_bench(path.read_text("utf-8"), str(path)).value
    assert paper is not None
    names = {role: paper.role[role].driver for role in ROLES} | replaced
    return Joined({role: load_driver(name) for role, name in names.items()}, paper)


@pytest.fixture
def joined() -> Joined:
    return join()


@pytest.fixture
def join_with() -> Callable[..., Joined]:
    return join
