"""A night as it could have been: shipped files, counts drawn from a curve, judged by the real statistics."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import pytest

from owlight.bench import common_uncertainty, read_bench
from owlight.logbook import Logbook, Provenance
from owlight.logbook.read import curve, history, open_reader
from owlight.statistics import Evidence, Reason, SensitivityRequest, budget, estimate, pool, run_checks
from owlight.theory import ber_of_snr_db, shot_noise_limit_dbm
from owlight.vocabulary.captures import Capture, CaptureId, Demodulation, Lane, StageReport, Tributary
from owlight.vocabulary.events import (
    AttemptFinished,
    ReceivedPower,
    SafeState,
    SafeStepOutcome,
    SegmentEnded,
    SegmentStarted,
)
from owlight.vocabulary.plan import Attempt, CaptureRequest, Measurand, Plan, Point, Signal, Source, StopRule
from owlight.vocabulary.result import Conclusion, Penalty
from owlight.vocabulary.terms import RECEIVED_POWER
from owlight.vocabulary.values import Identity, Setting, Stamp

ROOT = Path(__file__).resolve().parents[2]
PLANE_MINUS_TAP_DB = -9.54
A_W, B = 2.0e-8, 0.012
LANES = ("XI", "XQ", "YI", "YQ")
FILES = (
    ("sequence", "sequences/qpsk_sensitivity.toml"),
    ("bench", "simulated_instruments/bench.toml"),
    *(("driver", f"drivers/{path.name}") for path in sorted((ROOT / "drivers").glob("generic_*.toml"))),
    ("world", "simulated_instruments/world.toml"),
    *(("instrument", f"simulated_instruments/{name}.toml") for name in ("laser", "attenuator", "power_meter")),
    *(("instrument", f"simulated_instruments/{name}.toml") for name in ("pattern_source", "oscilloscope", "receiver")),
)


@dataclass(frozen=True)
class Told:
    folder: Path
    run_id: str


class Night:
    """Draws one night; stamps advance by declared seconds."""

    def __init__(self, seed: int, start_s: float) -> None:
        self.rng = np.random.default_rng(seed)
        self.seconds, self.count = start_s, 0

    def stamp(self, after_s: float = 0.0) -> Stamp:
        self.seconds += after_s
        self.count += 1
        hours, rest = divmod(self.seconds, 3600)
        day, hours = divmod(int(hours), 24)
        utc = f"2026-12-{day + 1:02}T{hours:02}:{int(rest // 60):02}:{rest % 60:09.6f}Z"
        return Stamp(utc, self.seconds, self.count)

    def capture(self, identifier: CaptureId) -> Capture:
        codes = self.rng.integers(-90, 90, (4, 64)).astype(np.int8)
        lanes = tuple(
            Lane(n, c, 1e-3, 0.0, 0.0, hashlib.sha256(c.tobytes()).hexdigest())
            for n, c in zip(LANES, codes, strict=True)
        )
        return Capture(identifier, self.stamp(2.0), 80e9, lanes, seed=self.count)

    def stay(self, plan: Plan, point: Point, number: int, reason: str, locked: bool = True) -> AttemptFinished:
        started = self.stamp(20.0)
        requested_dbm = float(point.value(RECEIVED_POWER) or 0.0)
        true_dbm = requested_dbm + 0.02 * self.rng.standard_normal() + 0.01
        tap_w = 1e-3 * 10 ** ((true_dbm - PLANE_MINUS_TAP_DB) / 10)
        before_w, after_w = (tap_w * (1 + 2e-3 * self.rng.standard_normal()) for _ in range(2))
        measured_dbm = 10 * np.log10((before_w + after_w) / 2 / 1e-3) + PLANE_MINUS_TAP_DB
        power = ReceivedPower(
            requested_dbm, 24.1, 24.1, before_w, before_w * 2e-3, after_w, after_w * 2e-3, float(measured_dbm), 0.004
        )
        identifier = CaptureId(point.index, number, 1)
        return AttemptFinished(
            at=self.stamp(12.0),
            attempt=Attempt(point, number, 1, reason, 0.0),
            outcome="ok",
            reason="",
            started=started,
            seconds=34.0,
            received_power=power,
            readings=(),
            captures=(identifier,),
            demodulations=(self.demodulation(plan, identifier, true_dbm, locked),),
            checks=(),
        )

    def demodulation(self, plan: Plan, identifier: CaptureId, true_dbm: float, locked: bool) -> Demodulation:
        snr = 1 / (A_W / (1e-3 * 10 ** (true_dbm / 10)) + B)
        ber = float(ber_of_snr_db("QPSK")(10 * np.log10(snr)))
        shares = {"XI": 0.95, "XQ": 0.97, "YI": 1.02, "YQ": 1.06}
        tributaries = tuple(
            Tributary(n, 94_000, int(self.rng.binomial(94_000, ber * shares[n])), float(10 * np.log10(snr)))
            for n in LANES
        )
        figures = {"sync_peak": 0.98, "sync_second": 0.2 + 0.02 * self.rng.random()}
        if not locked:
            return Demodulation(identifier, "c" * 64, "no lock", "no pattern found", (), None, None, None, (), 0.4)
        stages = (StageReport("pattern", 0.1, figures),)
        return Demodulation(identifier, "c" * 64, "locked", "", tributaries, 8.0, 40.0, 1.9, stages, 0.4)


def make_plan(seed: int) -> Plan:
    powers_dbm = np.arange(-40.0, -35.4, 0.5)
    points = [Point(i, (Setting(RECEIVED_POWER, float(p)),)) for i, p in enumerate(powers_dbm)]
    points.append(Point(len(points), (Setting(RECEIVED_POWER, -38.0),), reference=True))
    rng = np.random.default_rng(seed)
    last = len(points) - 1
    order = tuple((last, *(int(i) for i in rng.permutation(last))) for _ in range(3))
    texts = [(kind, Path(name).stem, (ROOT / name).read_text("utf-8")) for kind, name in FILES]
    return Plan(
        name="dual-polarisation QPSK sensitivity, 32 GBd",
        sources=tuple(Source(k, n, t, hashlib.sha256(t.encode()).hexdigest()) for k, n, t in texts),
        seed=seed,
        simulated=True,
        measurand=Measurand(
            "receiver signal input", "total average, both polarisations", "7 % overhead hard-decision FEC", 3.8e-3
        ),
        signal=Signal("QPSK", 32e9, 2, "root raised cosine", 0.1, 15, (0, 3178, 9760, 10855)),
        settings=(),
        conditions=(),
        points=tuple(points),
        order=order,
        readings=(),
        capture=CaptureRequest(100_000, 80e9, 64, LANES, "fixed", "all"),
        chain=None,
        stop=StopRule(3, 1),
        highest_power=(),
        stay_s=34.0,
        forecast_s=1000.0,
        forecast_bytes=1,
    )


def identities(night: Night, laser_firmware: str) -> list[Identity]:
    named = {"signal_laser": "SL", "local_oscillator": "LO", "attenuator": "AT", "power_meter": "PM"}
    named |= {"pattern_source": "PS", "oscilloscope": "SC", "receiver": "RX"}
    found = []
    for role, short in named.items():
        firmware = laser_firmware if role == "signal_laser" else "1.2"
        resource = "TCPIP::127.0.0.1::hislip0,40001::INSTR"
        serial = f"OWL-{short}-0001"
        identity = Identity(night.stamp(), role, resource, "Owlight", "simulated", serial, firmware, "generic")
        found.append(identity)
    return found


def concluded(plan: Plan, folder: Path, run_id: str) -> Conclusion:
    """As the program concludes: pooled, estimated, judged."""
    bench = read_bench(plan.sources[1].text, "bench").value
    assert bench is not None and plan.measurand is not None
    with open_reader(folder) as reader:
        stays = curve.stays(reader, run_id)
        demodulations = tuple(d for stay in history.history(reader, run_id) for d in stay.demodulations)
    points = pool(stays, plan.measurand.threshold_ber)
    request = SensitivityRequest(
        stays, plan.measurand.threshold_ber, ber_of_snr_db("QPSK"), common_uncertainty(bench), bench.meter.zero_u_w
    )
    found = estimate(request)
    assert not isinstance(found, Reason)
    threshold_ber = plan.measurand.threshold_ber
    evidence = Evidence(
        points, stays, demodulations, (found,), threshold_ber, request.ber_of_snr_db, 1e-10, error_queue=()
    )
    checks = run_checks(evidence)
    limit_dbm = shot_noise_limit_dbm("QPSK", 3.8e-3, 32e9, 1550.12, polarisations=2)
    penalty = Penalty("the shot-noise limit", found.received_power_dbm - limit_dbm, limit_dbm)
    return Conclusion(points, (found,), (penalty,), budget(request, found), checks, "")


def tell(folder: Path, seed: int, start_s: float, laser_firmware: str, troubled: bool) -> Told:
    plan, night = make_plan(seed), Night(seed, start_s)
    software = {"owlight": "0.1.0", "python": "3.11.7", "sqlite": "3.40.1", "numpy": "2.4.0"}
    with Logbook.open(folder) as logbook:
        writer = logbook.start_run(plan, Provenance(software, "bench-pc", "a person", "owlight demo"))
        for identity in identities(night, laser_firmware):
            writer.record(identity)
        writer.record(SegmentStarted(night.stamp(), 1, "started"))
        stays: dict[int, int] = {}
        for index in (i for indices in plan.order for i in indices):
            stays[index] = number = stays.get(index, 0) + 1
            point = plan.points[index]
            writer.record(night.capture(CaptureId(index, number, 1)))
            lost = troubled and index == 2 and number == 2
            stay = night.stay(plan, point, number, "reference" if point.reference else "pass", locked=not lost)
            if troubled and index == 5 and number == 3:
                stay = replace(stay, outcome="failed", reason="the oscilloscope's record was short", demodulations=())
            writer.record(stay)
        steps = (
            ("attenuator", "attenuation at 60 dB"),
            ("signal_laser", "output off"),
            ("local_oscillator", "output off"),
        )
        outcomes = tuple(SafeStepOutcome(role, words, "as expected", True) for role, words in steps)
        writer.record(SafeState(night.stamp(3.0), True, outcomes))
        writer.record(SegmentEnded(night.stamp(), "finished", "every planned stay was taken"))
        writer.conclude(concluded(plan, folder, writer.run_id))
        writer.close()
    _begin_at(folder, writer.run_id, Night(0, start_s).stamp().utc)
    return Told(folder, writer.run_id)


def _begin_at(folder: Path, run_id: str, utc: str) -> None:
    """The told night lies at its own time, not at that of the test."""
    import sqlite3

    with sqlite3.connect(folder / "logbook.db") as connection:
        connection.execute("UPDATE run SET started_utc = ? WHERE run = ?", (utc, run_id))
    connection.close()


@pytest.fixture(scope="session")
def told(tmp_path_factory: pytest.TempPathFactory) -> Told:
    """Two nights of one sequence; the second, with a stay lost and one without lock, is the one to report."""
    folder = tmp_path_factory.mktemp("a folder")
    tell(folder, 1, 20 * 3600.0, "1.2", troubled=False)
    return tell(folder, 2, 44 * 3600.0, "1.3", troubled=True)
