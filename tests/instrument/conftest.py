"""A bench in this process: our links and instruments on one side, the simulated instruments' engine on the other."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np
import pytest

from owlight import shipped
from owlight.bench import Bench, read_bench
from owlight.driver import Driver, read_driver
from owlight.instrument.instrument import Instrument
from owlight.instrument.open_bench import Access, OpenBench, open_bench
from owlight.link import Link, Stamper, memory_opener
from owlight.quantity import watts
from owlight.simulation.device.bench_time import BenchTime
from owlight.simulation.device.exchange import Exchange
from owlight.simulation.device.model import read_instrument
from owlight.simulation.instruments.build import build
from owlight.simulation.optics import LightSettings
from owlight.vocabulary.events import Event
from owlight.vocabulary.terms import ROLES

Spoil = Callable[[bytes], bytes | None]
"""Program message -> its response, or None to let the instrument answer."""


class LevelsOnly:
    """Optics of levels alone: what arrives follows from the demo bench's nominal losses; records are 20 mV of noise.

    The fields of the simulation are tested elsewhere; here they would only cost time.
    """

    def receiver_power_w(self, s: LightSettings, planned_time_s: float) -> float:
        return watts(s.signal_power_dbm - 12 - 1.5 - s.attenuation_db - 10.1) if s.signal_on else 0.0

    def meter_power_w(self, s: LightSettings, key: int, planned_time_s: float, averaging_s: float) -> float:
        noise = np.random.default_rng(key).normal(size=2)
        return self.receiver_power_w(s, 0.0) * 10**0.954 * (1 + 1e-4 * noise[0]) + 1e-12 * noise[1]

    def diode_peak_power_w(self, s: LightSettings) -> float:
        lo_w = watts(s.lo_power_dbm - 1) if s.lo_on else 0.0
        return (lo_w**0.5 + self.receiver_power_w(s, 0.0) ** 0.5) ** 2 / 4

    def damaged_by(self, peak_w: float) -> frozenset[str]:
        return frozenset(("XI", "XQ", "YI", "YQ")) if peak_w > watts(9.0) else frozenset()

    def photocurrent_a(self, s: LightSettings, key: int, planned_time_s: float) -> float:
        return (self.receiver_power_w(s, 0.0) + (watts(s.lo_power_dbm - 1) if s.lo_on else 0.0)) * s.bias

    def capture_codes(
        self, s: LightSettings, key: int, planned_time_s: float, damaged: frozenset[str]
    ) -> tuple[np.ndarray, ...]:
        noise = np.random.default_rng(key).normal(0, 0.02, (4, s.record_length))
        scaled = (np.clip(np.round(lane / v * 256), -128, 127) for lane, v in zip(noise, s.ranges_v, strict=True))
        return tuple(lane.astype(np.int8) for lane in scaled)


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
        self.simulated, self.truth = build(files, serials, LevelsOnly(), self.time)
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
        access = Access(self.resources, opener=self.opener, lock_folder=locks)
        return open_bench(self.paper, self.drivers, access, self.events.append, self.clock)


def join(**replaced: str) -> Joined:
    """The demo bench; `role="driver name"` replaces the instrument of a role by one that speaks a dialect."""
    path = shipped.find("simulated_instruments", "bench")
    paper = read_bench(path.read_text("utf-8"), str(path)).value
    assert paper is not None
    names = {role: paper.role[role].driver for role in ROLES} | replaced
    # addresses as of real instruments: what is simulated for one run alone needs no lock
    roles = {role: replace(paper.role[role], resource=f"memory {role}") for role in ROLES}
    return Joined({role: load_driver(name) for role, name in names.items()}, replace(paper, role=roles))


@pytest.fixture
def joined() -> Joined:
    return join()


@pytest.fixture(scope="session")
def join_with() -> Callable[..., Joined]:
    return join
