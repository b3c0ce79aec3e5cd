"""The open bench in memory: proof, locks, power guard, order of light, steering, capture, safe state."""

from __future__ import annotations

import hashlib
import json
import math
import socket
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from owlight.bench import LightState, received_power_dbm
from owlight.errors import BenchError, InstrumentError, LinkError, SafetyRefusal
from owlight.instrument.lock import SerialLock
from owlight.quantity import dbm
from owlight.vocabulary.captures import CaptureId
from owlight.vocabulary.events import Note
from owlight.vocabulary.plan import CaptureRequest
from owlight.vocabulary.terms import LO_POWER
from owlight.vocabulary.values import Applied, Identity, Reading, Term

ATTENUATION = Term("attenuator", "attenuation")
SIGNAL_ON, SIGNAL_POWER = Term("signal_laser", "output"), Term("signal_laser", "power")
LO_ON = Term("local_oscillator", "output")
BOTH = LightState(True, 10.0, True, 11.0)  # 10 dBm at the LO port
REQUEST = CaptureRequest(20_000, 80e9, 20_000, ("XI", "XQ", "YI", "YQ"), "fixed", "all")


def commands(joined) -> list[tuple[str, str]]:
    """What was set, without the questions around it."""
    sent = [(role, message.removesuffix(";*OPC?")) for role, message in joined.heard]
    return [(role, message) for role, message in sent if "?" not in message]


def lit(joined, tmp_path: Path):
    bench = joined.open(tmp_path)
    bench.set(Term("pattern_source", "output"), True)
    bench.light_up(BOTH)
    return bench


# ---- who is there ----


def test_opening_proves_everyone_and_sets_nothing(joined, tmp_path: Path) -> None:
    with joined.open(tmp_path) as bench:
        assert [who.serial_number for who in bench.identities] == [
            joined.paper.role[role].serial_number for role in bench.roles
        ]
        assert sum(isinstance(event, Identity) for event in joined.events) == 7
    assert commands(joined) == []


def test_wrong_serial_number_opens_nothing(joined, tmp_path: Path) -> None:
    joined.simulated["attenuator"].serial_number = "OWL-AT-9999"
    joined.spoil["attenuator"] = lambda m: b"Simulated,Attenuator G1,OWL-AT-9999,1.0\n" if m == b"*IDN?" else None
    with pytest.raises(InstrumentError, match=r"expects serial number OWL-AT-0001.*OWL-AT-9999"):
        joined.open(tmp_path)
    assert commands(joined) == []
    SerialLock(tmp_path, "OWL-SL-0001", "x", "now").release()  # locks taken before were given back


def test_missing_serial_number_is_noted(joined, tmp_path: Path) -> None:
    joined.spoil["attenuator"] = lambda m: b"Simulated,Attenuator G1,0,1.0\n" if m == b"*IDN?" else None
    with joined.open(tmp_path):
        assert any(isinstance(e, Note) and "rests on the bench file" in e.words for e in joined.events)


def test_second_bench_is_refused_by_serial_number(joined, join_with, tmp_path: Path) -> None:
    other = join_with()
    other.resources = dict(other.resources)  # other addresses, same serial numbers
    with joined.open(tmp_path):
        with pytest.raises(
            BenchError, match=r"OWL-SL-0001 is in use by .* \(process \d+\) since .*memory signal_laser"
        ):
            other.open(tmp_path)
        assert [message for _, message in other.heard] == ["*IDN?"]  # not even the error queue is touched
    other.open(tmp_path).close()


def test_private_simulation_is_not_locked(joined, tmp_path: Path) -> None:
    """Each run has a simulated bench of its own, all with the same serial numbers."""
    roles = {name: replace(role, resource="simulated socket") for name, role in joined.paper.role.items()}
    joined.paper = replace(joined.paper, role=roles)
    with joined.open(tmp_path):
        assert list(tmp_path.iterdir()) == []


def test_stale_lock_is_taken_and_noted(joined, tmp_path: Path) -> None:
    left = {"serial_number": "OWL-AT-0001", "resource": "there", "who": "night shift", "since": "yesterday"}
    (tmp_path / "OWL-AT-0001.lock").write_text(json.dumps(left | {"pid": 4_000_000, "host": socket.gethostname()}))
    with joined.open(tmp_path):
        note = next(e for e in joined.events if isinstance(e, Note))
        assert "left behind by night shift" in note.words and note.severity == "warning"


def test_lock_of_another_host_is_respected(tmp_path: Path) -> None:
    left = {"serial_number": "S", "resource": "there", "who": "somebody", "since": "yesterday", "pid": 1, "host": "far"}
    (tmp_path / "S.lock").write_text(json.dumps(left))
    with pytest.raises(BenchError, match="somebody on far"):
        SerialLock(tmp_path, "S", "here", "now")


# ---- limits ----


def test_light_comes_on_behind_closed_attenuator(joined, tmp_path: Path) -> None:
    """The attenuator powers up at 0 dB; 16 dBm through it would reach the receiver with more than its limit."""
    paper = replace(joined.paper, light_path=replace(joined.paper.light_path, transmitter_least_loss_db=0.0))
    joined.paper = paper
    with joined.open(tmp_path) as bench:
        assert bench.light.attenuation_db == 0.0
        bench.set(SIGNAL_POWER, 16.0)
        with pytest.raises(SafetyRefusal, match="receiver signal input"):
            bench.set_at_once(SIGNAL_ON, True, point=7)
        assert ("signal_laser", "OUTP:STAT 1") not in commands(joined)
        bench.set(SIGNAL_ON, True)
        lit_by = [("attenuator", "INP:ATT 60"), ("signal_laser", "OUTP:STAT 1")]
        assert commands(joined)[-2:] == lit_by
        with pytest.raises(SafetyRefusal):
            bench.set(ATTENUATION, 0.0)
        assert commands(joined)[-2:] == lit_by  # refused as a whole: not even its first step was taken


def test_unknown_state_counts_as_worst(joined, tmp_path: Path) -> None:
    """After a failed setting nothing is known of it, and darkening is the only thing that is never refused."""
    joined.paper = replace(joined.paper, light_path=replace(joined.paper.light_path, transmitter_least_loss_db=0.0))
    with lit(joined, tmp_path) as bench:
        joined.spoil["attenuator"] = lambda m: b"9.91E37\n" if m == b"INP:ATT?" else None
        with pytest.raises(InstrumentError):
            bench.set(ATTENUATION, 40.0)
        assert bench.light.attenuation_db is None
        with pytest.raises(SafetyRefusal, match="unknown"):
            bench.set_at_once(SIGNAL_POWER, 16.0)
        with pytest.raises(InstrumentError, match="attenuator"):  # it cannot be closed, so no power is raised
            bench.set(SIGNAL_POWER, 16.0)
        assert ("signal_laser", "SOUR:POW 16") not in commands(joined)
        joined.spoil.clear()
        bench.set(ATTENUATION, 60.0)
        bench.set(SIGNAL_POWER, 16.0)


def test_bias_stays_on_while_light_may_be(joined, tmp_path: Path) -> None:
    with lit(joined, tmp_path) as bench, pytest.raises(SafetyRefusal, match="bias"):
        bench.set(Term("receiver", "bias"), False)


def test_lo_power_is_turned_into_laser_power(joined, tmp_path: Path) -> None:
    with joined.open(tmp_path) as bench:
        applied = bench.set(LO_POWER, 10.0)
        assert applied.setting.term == Term("local_oscillator", "power")
        assert applied.setting.value == 10.0 + joined.paper.light_path.lo_loss_db


# ---- light ----


def test_light_comes_up_in_the_safe_order(joined, tmp_path: Path) -> None:
    with joined.open(tmp_path) as bench:
        bench.light_up(replace(BOTH, signal_power_dbm=8.0))
        assert [message for _, message in commands(joined)] == [
            "SOUR:BIAS:STAT 1",
            "INP:ATT 60",
            "SOUR:POW 11",
            "OUTP:STAT 1",
            "SOUR:POW 8",
            "OUTP:STAT 1",
        ]
        assert bench.light == LightState(True, 8.0, True, 11.0, 60.0)
    assert joined.truth.damaged == frozenset()


def test_wavelength_changes_in_the_dark_everywhere(joined, tmp_path: Path) -> None:
    with lit(joined, tmp_path) as bench:
        joined.heard.clear()
        bench.set_wavelength(1551.0, 1551.1)
        sent = commands(joined)
        first_wavelength = next(n for n, (_, m) in enumerate(sent) if "WAV" in m)
        assert [m for _, m in sent[:first_wavelength]] == ["INP:ATT 60", "OUTP:STAT 0", "OUTP:STAT 0"]
        assert {role for role, m in sent if "WAV" in m} == {
            "signal_laser",
            "local_oscillator",
            "power_meter",
            "attenuator",
        }
        assert sent[-2:] == [("local_oscillator", "OUTP:STAT 1"), ("signal_laser", "OUTP:STAT 1")]
        assert joined.simulated["local_oscillator"].value("wavelength") == pytest.approx(1551.1)
        joined.heard.clear()
        bench.set_wavelength(1551.0, 1551.1)
        assert joined.heard == []  # it stands so: no reason to darken


def test_sweeping_one_wavelength_leaves_the_other(joined, tmp_path: Path) -> None:
    with lit(joined, tmp_path) as bench:
        for signal_nm, lo_nm, roles in (
            (1551.0, None, {"signal_laser", "power_meter", "attenuator"}),
            (None, 1551.0, {"local_oscillator"}),
        ):
            joined.heard.clear()
            bench.set_wavelength(signal_nm, lo_nm)
            sent = commands(joined)
            assert {role for role, message in sent if "WAV" in message} == roles
            dark = [place for place, (_, message) in enumerate(sent) if message == "OUTP:STAT 0"]
            assert len(dark) == 2 and dark[1] < next(n for n, (_, m) in enumerate(sent) if "WAV" in m)


def test_wavelength_of_a_lit_laser_is_refused(joined, tmp_path: Path) -> None:
    with lit(joined, tmp_path) as bench:
        joined.heard.clear()
        with pytest.raises(BenchError, match="only in the dark"):
            bench.set(Term("local_oscillator", "wavelength"), 1551.0)
        assert joined.heard == []


def test_wavelength_outside_calibration_touches_nothing(joined, tmp_path: Path) -> None:
    with joined.open(tmp_path) as bench:
        with pytest.raises(BenchError, match="calibration"):
            bench.set_wavelength(1565.0)
        assert commands(joined) == []


def test_zero_happens_only_in_proven_dark(joined, tmp_path: Path) -> None:
    with lit(joined, tmp_path) as bench:
        joined.heard.clear()
        bench.zero_meter()
        sent = [m for _, m in commands(joined)]
        assert sent[:3] == ["INP:ATT 60", "OUTP:STAT 0", "OUTP:STAT 0"] and sent[3] == "CAL:ZERO:AUTO ONCE"


def test_light_in_the_dark_forbids_zero(joined, tmp_path: Path) -> None:
    with joined.open(tmp_path) as bench:
        joined.spoil["power_meter"] = lambda m: b"1E-6\n" if m.startswith(b"READ") else None
        with pytest.raises(InstrumentError, match="not dark"):
            bench.zero_meter()
        assert not any("ZERO" in m for _, m in joined.heard)


# ---- steering ----


@pytest.mark.parametrize("attenuator", ["generic_attenuator", "attenuator_actual", "attenuator_negative"])
def test_received_power_is_reached_as_the_tap_sees_it(attenuator: str, join_with, tmp_path: Path) -> None:
    joined = join_with(attenuator=attenuator)
    with lit(joined, tmp_path) as bench:
        for wanted_dbm in (-38.0, -41.0, -36.5, -36.5):
            steered = bench.set_received_power(wanted_dbm)
            assert steered.attenuation_read_db == pytest.approx(steered.attenuation_set_db, abs=0.02)
            tap_w = bench.read(Term("power_meter", "power")).value
            # after at most one correction: grid of the attenuator and noise of the reading, both below 0.03 dB
            assert received_power_dbm(joined.paper, tap_w) == pytest.approx(wanted_dbm, abs=0.06)
    assert joined.truth.damaged == frozenset()


def test_steps_up_are_small_and_come_from_the_dark(joined, tmp_path: Path) -> None:
    with lit(joined, tmp_path) as bench:
        for wanted_dbm in (-36.0, -40.0, -38.0, -44.0):
            joined.events.clear()
            start_db = bench.light.attenuation_db
            bench.set_received_power(wanted_dbm)
            way_db = [start_db] + [float(e.read_back) for e in joined.events if isinstance(e, Applied)]
            moves_db = np.diff(way_db)
            assert np.all(moves_db >= -3.0 - 0.02)  # the attenuator's tolerance
            assert moves_db[-1] < 0  # the last move is towards light


def test_every_step_is_looked_at_after_a_full_window(joined, tmp_path: Path) -> None:
    with lit(joined, tmp_path) as bench:
        bench.set(Term("power_meter", "averaging_time"), 0.5)
        joined.events.clear()
        bench.set_received_power(-36.0)
        last_move_s = math.nan
        for event in joined.events:
            if isinstance(event, Applied):
                last_move_s = event.at.monotonic_s
            if isinstance(event, Reading) and event.phase == "steering":
                # a window waited for, and the reading's own window after it
                assert event.at.monotonic_s - last_move_s >= 1.0 - 1e-9


def test_more_light_than_worst_case_stops(joined, tmp_path: Path) -> None:
    with lit(joined, tmp_path) as bench:
        joined.spoil["power_meter"] = lambda m: b"1E-5\n" if m.startswith(b"READ") else None
        with pytest.raises(InstrumentError, match="more than the bench file allows"):
            bench.set_received_power(-38.0)


def test_light_that_does_not_arrive_stops(joined, tmp_path: Path) -> None:
    with lit(joined, tmp_path) as bench:
        joined.spoil["power_meter"] = lambda m: b"1E-12\n" if m.startswith(b"READ") else None
        with pytest.raises(InstrumentError, match="is expected"):
            bench.set_received_power(-36.0)


def test_attenuator_that_lost_power_is_noticed(joined, tmp_path: Path) -> None:
    with lit(joined, tmp_path) as bench:
        bench.set_received_power(-38.0)
        joined.simulated["attenuator"].power_up()
        with pytest.raises(InstrumentError, match="lost its power"):
            bench.set_received_power(-37.0)


def test_steering_in_the_dark_is_refused(joined, tmp_path: Path) -> None:
    with joined.open(tmp_path) as bench:
        with pytest.raises(BenchError, match="light up first"):
            bench.set_received_power(-38.0)
        assert commands(joined) == []


def test_unreachable_power_moves_nothing(joined, tmp_path: Path) -> None:
    with lit(joined, tmp_path) as bench:
        joined.heard.clear()
        with pytest.raises(BenchError, match="outside 0 to 60 dB"):
            bench.set_received_power(-90.0)
        assert commands(joined) == []


# ---- capture ----


def test_capture_holds_lanes_volts_and_hashes(joined, tmp_path: Path) -> None:
    with lit(joined, tmp_path) as bench:
        bench.set(Term("oscilloscope", "sample_rate"), 80e9)
        bench.set(Term("oscilloscope", "record_length"), 20_000)
        for channel in range(1, 5):
            bench.set(Term("oscilloscope", f"range_{channel}"), 0.05)
        capture = bench.capture(CaptureId(3, 1, 2), 77, 12.5, REQUEST)
    assert (capture.id, capture.seed, capture.planned_time_s) == (CaptureId(3, 1, 2), 77, 12.5)
    assert capture.sample_rate_hz == pytest.approx(80e9) and [lane.name for lane in capture.lanes] == list(
        REQUEST.lanes
    )
    for lane in capture.lanes:
        assert lane.sha256 == hashlib.sha256(lane.codes.tobytes()).hexdigest()
        assert lane.volts_per_code == 0.05 / 256
        # 20 mV rms in +-25 mV: 21.1 % of a Gaussian lie outside 1.25 sigma, which 20,000 samples know to 0.3 %
        assert lane.clipped_fraction == pytest.approx(0.2113, abs=0.012)
    assert len({lane.sha256 for lane in capture.lanes}) == 4


def test_short_record_is_handed_on_as_it_is(joined, tmp_path: Path) -> None:
    with lit(joined, tmp_path) as bench:
        bench.set(Term("oscilloscope", "record_length"), 20_000)
        joined.spoil["oscilloscope"] = lambda m: b"#3100" + bytes(100) + b"\n" if m.startswith(b"FETC") else None
        capture = bench.capture(CaptureId(0, 0, 0), 1, 0.0, REQUEST)
        assert all(lane.codes.size == 100 for lane in capture.lanes)


# ---- safe ----


def test_safe_state_is_confirmed_in_order(joined, tmp_path: Path) -> None:
    with lit(joined, tmp_path) as bench:
        bench.set_received_power(-36.0)
        joined.heard.clear()
        safe = bench.make_safe()
        assert safe.confirmed and [step.role for step in safe.steps] == [
            "attenuator",
            "signal_laser",
            "local_oscillator",
        ]
        assert [m for _, m in commands(joined)] == ["INP:ATT 60", "OUTP:STAT 0", "OUTP:STAT 0"]
        assert bench.light == LightState(False, 10.0, False, 11.0, 60.0)
    assert joined.simulated["receiver"].value("bias") is True


def test_dead_attenuator_does_not_keep_the_sources_on(joined, tmp_path: Path) -> None:
    with lit(joined, tmp_path) as bench:
        joined.spoil["attenuator"] = lambda m: b"" if b"?" in m else None
        with pytest.raises(LinkError):
            bench.read_setting(ATTENUATION)
        safe = bench.make_safe()
        assert not safe.confirmed
        # a dead link may hide an open attenuator, so the sources did not wait for it
        assert [(step.role, step.confirmed) for step in safe.steps] == [
            ("signal_laser", True),
            ("local_oscillator", True),
            ("attenuator", False),
        ]
    assert joined.simulated["signal_laser"].value("output") is False
    assert joined.simulated["local_oscillator"].value("output") is False


def test_full_disk_does_not_keep_the_light_on(joined, tmp_path: Path) -> None:
    bench = lit(joined, tmp_path)

    def full(event: object) -> None:
        raise OSError("disk full")

    bench._emit_event = full
    with pytest.raises(OSError, match="disk full"):
        bench.set(ATTENUATION, 50.0)
    assert bench.make_safe().confirmed
    bench.close()


def test_closing_never_leaves_light_behind(joined, tmp_path: Path) -> None:
    with pytest.raises(RuntimeError, match="anything"), lit(joined, tmp_path):
        raise RuntimeError("anything")
    assert joined.simulated["signal_laser"].value("output") is False


def test_unexpected_answer_is_unconfirmed(joined, tmp_path: Path) -> None:
    with lit(joined, tmp_path) as bench:
        joined.spoil["signal_laser"] = lambda m: b"1\n" if m == b"OUTP:STAT?" else None
        safe = bench.make_safe()
        assert [step.confirmed for step in safe.steps] == [True, False, True]


def test_dialects_reach_the_safe_state_too(join_with, tmp_path: Path) -> None:
    for signal, attenuator in (("laser_in_watts", "attenuator_actual"), ("laser_in_frequency", "attenuator_negative")):
        joined = join_with(signal_laser=signal, attenuator=attenuator)
        with joined.open(tmp_path) as bench:
            bench.light_up(BOTH)
            assert joined.simulated["signal_laser"].value("output") is True
            assert bench.make_safe().confirmed
        assert joined.simulated["signal_laser"].value("output") is False
        assert joined.simulated["attenuator"].value("attenuation") == pytest.approx(60.0)


def test_tap_and_paper_agree_on_expected_power(joined, tmp_path: Path) -> None:
    """The truth of the simulation, asked without our arithmetic."""
    with lit(joined, tmp_path) as bench:
        bench.set_received_power(-37.0)
        true_w = joined.truth.truth()["receiver_power_w"]
        # plane_minus_tap and the tap ratio of these tests are both 9.54 dB; a correction leaves 0.03 dB and noise
        assert dbm(true_w) == pytest.approx(-37.0, abs=0.06)
        assert np.isfinite(true_w)
