"""A small run, made of the vocabulary's values, with a bookkeeping that tests can predict."""

from __future__ import annotations

import hashlib
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from owlight.logbook import Logbook, Provenance, RunWriter
from owlight.vocabulary.captures import Capture, CaptureId, Demodulation, Lane, StageReport, Tributary
from owlight.vocabulary.events import (
    AttemptFinished,
    Check,
    ReceivedPower,
    SafeState,
    SafeStepOutcome,
    SegmentEnded,
    SegmentStarted,
)
from owlight.vocabulary.plan import Attempt, CaptureRequest, ChainText, Measurand, Plan, Point, Signal, Source, StopRule
from owlight.vocabulary.terms import RECEIVED_POWER
from owlight.vocabulary.values import Applied, Exchange, Identity, Reading, Setting, Stamp, Term

METER = Term("power_meter", "power")


class Story:
    """Makes events in order; every stamp is one second after the last."""

    def __init__(self) -> None:
        self.count = 0

    def stamp(self) -> Stamp:
        self.count += 1
        return Stamp(f"2026-11-30T20:{self.count // 60:02}:{self.count % 60:02}.000000Z", float(self.count), self.count)

    def capture(self, point: int, attempt: int, number: int = 1) -> Capture:
        rng = np.random.default_rng([point, attempt, number])
        lanes = []
        for name in ("XI", "XQ", "YI", "YQ"):
            codes = rng.integers(-100, 100, 4096).astype(np.int8)
            lanes.append(Lane(name, codes, 1e-3, 0.0, 0.0, hashlib.sha256(codes.tobytes()).hexdigest()))
        return Capture(CaptureId(point, attempt, number), self.stamp(), 80e9, tuple(lanes), seed=point * 100 + attempt)

    def stay(self, plan: Plan, point: int, attempt: int, errors: int, bits: int = 400_000) -> AttemptFinished:
        started = self.stamp()
        identifier = CaptureId(point, attempt, 1)
        names = ("XI", "XQ", "YI", "YQ")
        shares = [errors // 4 + (1 if i < errors % 4 else 0) for i in range(4)]
        tributaries = tuple(Tributary(n, bits // 4, e, 8.5) for n, e in zip(names, shares, strict=True))
        stage = StageReport("carrier phase", 0.01, {"linewidth_hz": 1e5})
        power_dbm = float(plan.points[point].value(RECEIVED_POWER) or 0.0)
        tap_w = 1e-3 * 10 ** ((power_dbm + 9.54) / 10)
        power = ReceivedPower(power_dbm, 30.0, 30.01, tap_w, tap_w * 1e-3, tap_w, tap_w * 1e-3, power_dbm, 0.004)
        return AttemptFinished(
            at=self.stamp(),
            attempt=Attempt(plan.points[point], attempt, 1, "pass", 10.0),
            outcome="ok",
            reason="",
            started=started,
            seconds=1.5,
            received_power=power,
            readings=(Reading(self.stamp(), METER, tap_w, tap_w * 1e-3, 5, "before"),),
            captures=(identifier,),
            demodulations=(
                Demodulation(identifier, "c" * 64, "locked", "", tributaries, 8.5, 37.0, 1.95, (stage,), 0.1),
            ),
            checks=(Check("error count", f"stay {point}/{attempt}", float(errors), 100.0, "ok", "enough errors"),),
        )


def make_plan(powers_dbm: tuple[float, ...] = (-39.0, -38.0), keep: str = "all") -> Plan:
    text = "sequence = 'a test'"
    points = tuple(Point(i, (Setting(RECEIVED_POWER, p),)) for i, p in enumerate(powers_dbm))
    return Plan(
        name="a test",
        sources=(Source("sequence", "a_test", text, hashlib.sha256(text.encode()).hexdigest()),),
        seed=7,
        simulated=True,
        measurand=Measurand("receiver signal input", "total average, both polarisations", "7 % overhead", 3.8e-3),
        signal=Signal("QPSK", 32e9, 2, "root raised cosine", 0.1, 15, (0, 3178, 9760, 10855)),
        settings=(Setting(Term("signal_laser", "power"), 10.0),),
        conditions=(),
        points=points,
        order=(tuple(range(len(points))), tuple(range(len(points)))),
        readings=(METER,),
        capture=CaptureRequest(1000, 80e9, 4096, ("XI", "XQ", "YI", "YQ"), "fixed", keep),
        chain=ChainText("dual polarisation", "{}", "c" * 64),
        stop=StopRule(2, 1),
        highest_power=(),
        stay_s=1.5,
        forecast_s=6.0,
        forecast_bytes=64_000,
    )


PROVENANCE = Provenance({"owlight": "0.1.0", "python": "3.11"}, "host", "a person", "owlight run")


def tell(writer: RunWriter, story: Story, plan: Plan, stays: int = 4) -> list[AttemptFinished]:
    """A whole small run, with chatter between the stays."""
    told = []
    writer.record(Identity(story.stamp(), "attenuator", "TCPIP::127.0.0.1::1::SOCKET", "m", "a", "S1", "1.0", "g"))
    writer.record(SegmentStarted(story.stamp(), 1, "started"))
    writer.record(Applied(story.stamp(), Setting(Term("attenuator", "attenuation"), 30.0), 30.01, 0.05, True, 0.2))
    for number in range(stays):
        point, attempt = number % len(plan.points), number // len(plan.points) + 1
        writer.record(Exchange(story.stamp(), "attenuator", "INP:ATT?", "30", None, None, 0.001, "", False))
        writer.record(story.capture(point, attempt))
        finished = story.stay(plan, point, attempt, errors=1000 * (point + 1) + attempt)
        writer.record(finished)
        told.append(finished)
    outcome = SafeStepOutcome("attenuator", "attenuation to 60 dB", "60", True)
    writer.record(SafeState(story.stamp(), True, (outcome,)))
    writer.record(SegmentEnded(story.stamp(), "finished", "every planned stay was taken"))
    return told


@pytest.fixture
def plan() -> Plan:
    return make_plan()


@pytest.fixture
def plan_keeping() -> Callable[[str], Plan]:
    """A plan with another rule of what raw data stay."""
    return lambda keep: make_plan(keep=keep)


@pytest.fixture
def story() -> Story:
    return Story()


@pytest.fixture
def tell_run() -> Callable[..., list[AttemptFinished]]:
    return tell


@pytest.fixture
def provenance() -> Provenance:
    return PROVENANCE


@pytest.fixture
def told(tmp_path: Path) -> tuple[Path, str, Plan, list[AttemptFinished]]:
    """A finished run in a folder: (folder, run id, plan, stays)."""
    plan = make_plan()
    with Logbook.open(tmp_path) as logbook:
        writer = logbook.start_run(plan, PROVENANCE)
        stays = tell(writer, Story(), plan)
        writer.close()
    return tmp_path, writer.run_id, plan, stays
