"""Attenuation before power, whatever a sequence sweeps: transitions stay below what the forecast says of the points."""

from __future__ import annotations

import itertools
from dataclasses import replace
from pathlib import Path

import pytest

from owlight.bench import Bench, LightState, worst_case
from owlight.bench.model import Limit
from owlight.errors import InstrumentError, LinkError
from owlight.instrument.safe_state import reach_safe_state
from owlight.plan import light_state, safe_steps
from owlight.quantity import dbm
from owlight.vocabulary.terms import LO_POWER, RECEIVED_POWER
from owlight.vocabulary.values import Setting, Term

ATTENUATION = Term("attenuator", "attenuation")
SIGNAL_ON, SIGNAL_POWER = Term("signal_laser", "output"), Term("signal_laser", "power")
BOTH = LightState(True, 2.0, True, 7.0)
ROUNDING_DB = 0.35  # one correction by the tap (grid of the attenuator, noise of the reading) and its start 0.3 dB off


def highest(paper: Bench, state: LightState) -> dict[str, float]:
    return {power.plane: power.power_dbm for power in worst_case(paper, state)}


def commands(joined) -> list[str]:
    return [message.removesuffix(";*OPC?") for _, message in joined.heard if "?" not in message.removesuffix(";*OPC?")]


def test_swept_source_power_never_exceeds_the_forecast(joined, tmp_path: Path) -> None:
    """2 dBm and then 12 dBm at one received power: raised first, it would arrive ten decibels too high."""
    points = [
        (Setting(SIGNAL_POWER, signal_dbm), Setting(LO_POWER, lo_dbm), Setting(RECEIVED_POWER, -30.0))
        for signal_dbm, lo_dbm in itertools.product((2.0, 12.0), (6.0, 12.0))
    ]
    forecast = [highest(joined.paper, light_state(joined.paper, point)) for point in points]
    most = {plane: max(of_point[plane] for of_point in forecast) + ROUNDING_DB for plane in forecast[0]}
    joined.paper = replace(joined.paper, limit={plane: Limit(power_dbm) for plane, power_dbm in most.items()})
    arrived_dbm: list[float] = []
    with joined.open(tmp_path) as bench:

        def watch(event: object) -> None:
            if (arrives_w := joined.truth.truth()["receiver_power_w"]) > 0:
                arrived_dbm.append(dbm(arrives_w))

        bench.set(Term("pattern_source", "output"), True)
        bench.light_up(BOTH)
        bench._emit_event = watch
        for point in (*points, *reversed(points), points[0], points[-1]):
            for setting in point[:2]:
                bench.set(setting.term, setting.value)
            bench.set_received_power(-30.0)
    # nothing was refused at these tight limits; and the truth, asked after every exchange, is its nominal self
    assert len(arrived_dbm) > 500 and max(arrived_dbm) <= -30.0 + ROUNDING_DB
    assert joined.truth.damaged == frozenset()


@pytest.mark.parametrize(("term", "value", "message"), [
    (SIGNAL_POWER, 8.0, "SOUR:POW 8"), (LO_POWER, 10.0, "SOUR:POW 11"), (SIGNAL_ON, True, "OUTP:STAT 1"),
])  # fmt: skip
def test_attenuator_closes_before_power_rises(joined, term: Term, value: float | bool, message: str, tmp_path) -> None:
    with joined.open(tmp_path) as bench:
        bench.light_up(BOTH)
        bench.set_received_power(-35.0)
        if term == SIGNAL_ON:
            bench.set(SIGNAL_ON, False)
        joined.heard.clear()
        bench.set(term, value)
        assert commands(joined) == ["INP:ATT 60", message]


def test_equal_or_less_power_leaves_the_attenuator(joined, tmp_path: Path) -> None:
    with joined.open(tmp_path) as bench:
        bench.light_up(BOTH)
        bench.set_received_power(-35.0)
        joined.heard.clear()
        for term, value in ((LO_POWER, 6.0), (SIGNAL_POWER, 2.0), (SIGNAL_POWER, 1.0), (LO_POWER, 5.0)):
            bench.set(term, value)
        assert not any("INP:ATT" in message for _, message in joined.heard)


def test_restarted_attenuator_stops_a_raise(joined, tmp_path: Path) -> None:
    with joined.open(tmp_path) as bench:
        bench.light_up(BOTH)
        joined.simulated["attenuator"].power_up()
        joined.heard.clear()
        with pytest.raises(InstrumentError, match="lost its power"):
            bench.set(SIGNAL_POWER, 8.0)
        assert commands(joined) == []
        safe = bench.make_safe()
        # its word contradicts what it was told: the sources first
        assert [step.role for step in safe.steps] == ["signal_laser", "local_oscillator", "attenuator"]
        assert commands(joined) == ["OUTP:STAT 0", "OUTP:STAT 0", "INP:ATT 60"]
        assert bench.make_safe().steps[0].role == "attenuator"  # trusted again once it was confirmed


def test_bare_attenuation_opens_in_small_steps(joined, tmp_path: Path) -> None:
    with joined.open(tmp_path) as bench:
        bench.light_up(BOTH)
        joined.heard.clear()
        applied = bench.set(ATTENUATION, 20.0)
        assert applied.read_back == pytest.approx(20.0)
        way_db = [60.0] + [float(m.split()[1]) for m in commands(joined)]
        assert len(way_db) == 15  # 40 dB in steps of at most 3 dB
        assert all(before - after <= 3.0 + 1e-9 for before, after in itertools.pairwise(way_db))
        looks = [place for place, (_, m) in enumerate(joined.heard) if m.startswith("READ:POW?")]
        moves = [place for place, (_, m) in enumerate(joined.heard) if m.startswith("INP:ATT ")]
        assert len(looks) == len(moves) and all(move < look for move, look in zip(moves, looks, strict=True))
        joined.heard.clear()
        bench.set(ATTENUATION, 30.0)  # darker goes at once
        assert commands(joined) == ["INP:ATT 30"]


def test_bare_attenuation_stops_where_the_tap_contradicts(joined, tmp_path: Path) -> None:
    with joined.open(tmp_path) as bench:
        bench.light_up(BOTH)
        joined.spoil["power_meter"] = lambda m: b"1E-4\n" if m.startswith(b"READ") else None
        joined.heard.clear()
        with pytest.raises(InstrumentError, match="more than the bench file allows"):
            bench.set(ATTENUATION, 20.0)
        assert len(commands(joined)) == 1


def test_attenuation_in_the_dark_goes_at_once(joined, tmp_path: Path) -> None:
    with joined.open(tmp_path) as bench:
        bench.set(ATTENUATION, 60.0)
        bench.set(ATTENUATION, 10.0)
        assert commands(joined) == ["INP:ATT 60", "INP:ATT 10"]


# ---- safe state ----


def test_closing_repeats_what_was_not_confirmed(joined, tmp_path: Path) -> None:
    bench = joined.open(tmp_path)
    bench.light_up(BOTH)
    joined.spoil["signal_laser"] = lambda m: b"" if b"?" in m or b"OUTP" in m else None
    with pytest.raises(LinkError):
        bench.read_setting(SIGNAL_ON)
    assert not bench.make_safe().confirmed
    assert joined.simulated["signal_laser"].value("output") is True
    joined.spoil.clear()  # somebody put the cable back
    bench.close()
    assert joined.simulated["signal_laser"].value("output") is False


def test_closing_repeats_nothing_confirmed(joined, tmp_path: Path) -> None:
    bench = joined.open(tmp_path)
    bench.light_up(BOTH)
    assert bench.make_safe().confirmed
    joined.heard.clear()
    bench.close()
    assert joined.heard == []


@pytest.mark.parametrize(("serial", "accepted"), [("OWL-SL-0001", True), ("0", True), ("", True), ("OWL-SL-9", False)])
def test_one_rule_proves_an_identity(joined, serial: str, accepted: bool, tmp_path: Path) -> None:
    """What a run accepts the guard and `safe` must accept too, or that laser would stay on."""
    answer = f"Simulated,Laser G1,{serial},1.0\n".encode()
    joined.spoil["signal_laser"] = lambda m: answer if m == b"*IDN?" else None
    steps = safe_steps(joined.paper, joined.drivers, joined.resources)
    safe = reach_safe_state(steps, joined.events.append, joined.clock, joined.opener)
    assert {step.role: step.confirmed for step in safe.steps}["signal_laser"] is accepted
    if accepted:
        joined.open(tmp_path).close()
        return
    with pytest.raises(InstrumentError, match="expects serial number"):
        joined.open(tmp_path)


def test_safe_is_confirmed_only_once_settled(joined, tmp_path: Path) -> None:
    """The attenuator answers where it was sent while it still moves."""
    with joined.open(tmp_path) as bench:
        left = [3]

        def moving(message: bytes) -> bytes | None:
            if message != b"STAT:OPER:COND?" or left[0] == 0:
                return None
            left[0] -= 1
            return b"2\n"

        joined.spoil["attenuator"] = moving
        joined.heard.clear()
        assert bench.make_safe().confirmed
        asked = [m for role, m in joined.heard if role == "attenuator"]
        assert left == [0] and asked.count("STAT:OPER:COND?") >= 4


def test_attenuator_that_never_settles_is_said_so(joined, tmp_path: Path) -> None:
    with joined.open(tmp_path) as bench:
        joined.spoil["attenuator"] = lambda m: b"2\n" if m == b"STAT:OPER:COND?" else None
        safe = bench.make_safe()
        step = safe.steps[0]
        assert not step.confirmed and "has not settled yet" in step.words
        assert [later.confirmed for later in safe.steps[1:]] == [True, True]


def test_step_without_sign_of_settling_says_so(join_with) -> None:
    joined = join_with(signal_laser="laser_in_watts", attenuator="attenuator_actual")
    steps = safe_steps(joined.paper, joined.drivers, joined.resources)
    assert [step.words for step in steps] == [
        "attenuator.attenuation to 60 dB",
        "signal_laser.output off; nothing shows when it has settled",
        "local_oscillator.output off",
    ]
