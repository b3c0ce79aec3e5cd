"""A whole bench in memory: the shipped instrument files in front of an optical model of levels only."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest

from owlight.simulation.device.bench_time import BenchTime
from owlight.simulation.device.exchange import Exchange
from owlight.simulation.device.instrument import Instrument
from owlight.simulation.device.model import read_instrument
from owlight.simulation.instruments.build import build
from owlight.simulation.light import SharedLight
from owlight.simulation.optics import LightSettings
from owlight.vocabulary.terms import ROLES

FILES = Path(__file__).parents[2] / "simulated_instruments"
_USUAL = dict(zip(ROLES, ROLES, strict=True)) | {"signal_laser": "laser", "local_oscillator": "laser"}


class Levels:
    """Ten decibels on the way, no noise; codes are a function of the key alone."""

    highest_diode_w = 3e-3

    def receiver_power_w(self, s: LightSettings, planned_time_s: float) -> float:
        return 1e-3 * math.pow(10, (s.signal_power_dbm - 10.0 - s.attenuation_db) / 10) if s.signal_on else 0.0

    def meter_power_w(self, s: LightSettings, key: int, planned_time_s: float, averaging_s: float) -> float:
        return self.receiver_power_w(s, planned_time_s)

    def diode_peak_power_w(self, s: LightSettings) -> float:
        lo_w = 1e-3 * math.pow(10, s.lo_power_dbm / 10) / 4 if s.lo_on else 0.0
        return (math.sqrt(lo_w) + math.sqrt(self.receiver_power_w(s, 0.0))) ** 2

    def damaged_by(self, peak_w: float) -> frozenset[str]:
        return frozenset({"XI"}) if peak_w > self.highest_diode_w else frozenset()

    def photocurrent_a(self, s: LightSettings, key: int, planned_time_s: float) -> float:
        return self.receiver_power_w(s, planned_time_s) if s.bias else 0.0

    def capture_codes(
        self, s: LightSettings, key: int, planned_time_s: float, damaged: frozenset[str]
    ) -> tuple[np.ndarray, ...]:
        generator = np.random.default_rng(key)
        return tuple(generator.integers(-128, 128, s.record_length, dtype=np.int8) for _ in range(4))


@dataclass(frozen=True)
class MemoryBench:
    instruments: dict[str, Instrument]
    light: SharedLight
    time: BenchTime

    def ask(self, role: str, *messages: str) -> str:
        """The last answer, without its terminator; empty where there is none."""
        responses: list[bytes] = []
        for message in messages:
            responses = Exchange(self.instruments[role]).write(message.encode("latin-1"), end=True)
        return responses[-1].decode("latin-1")[:-1] if responses else ""

    def error(self, role: str) -> int:
        return int(self.ask(role, "SYST:ERR?").split(",")[0])


@pytest.fixture
def make_bench() -> Callable[..., MemoryBench]:
    def make(**dialects: str) -> MemoryBench:
        names = {role: dialects.get(role, name) for role, name in _USUAL.items()}
        documents = {role: read_instrument((FILES / f"{name}.toml").read_text(), name) for role, name in names.items()}
        assert not [problem for document in documents.values() for problem in document.problems]
        files = {role: document.value for role, document in documents.items() if document.value}
        time = BenchTime(stepped=True)
        instruments, light = build(files, dict.fromkeys(ROLES, "S-1"), Levels(), time)
        return MemoryBench(instruments, light, time)

    return make


@pytest.fixture
def bench(make_bench: Callable[..., MemoryBench]) -> MemoryBench:
    return make_bench()
