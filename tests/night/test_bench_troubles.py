"""What a bench does at night, seen through real sockets: every one ends dark, and with its name."""

from __future__ import annotations

import socket
import sqlite3
from pathlib import Path
from typing import Any

import pytest

from owlight.errors import StorageError
from owlight.instrument.instrument import Instrument
from owlight.logbook.write import RunWriter
from owlight.simulation import RunningSimulation
from owlight.vocabulary.events import AttemptFinished, Event, SafeState
from owlight.vocabulary.values import Applied, Exchange

PHOTODIODE_LIMIT_W = 10 ** (0.8 - 3)  # 8 dBm, as the bench file has it
LIGHT_ONLY = {
    'setting = "attenuator.attenuation"': 'setting = "received_power"',
    '"15 dB"': '"-30 dBm"',
    '"30 dB"': '"-27 dBm"',
    "passes = 2": "passes = 1",
}
"""power_log turned into a short sweep of received power without captures."""


def say(running: RunningSimulation, role: str, *messages: str) -> None:
    """As somebody would over a plain socket, before us."""
    port = int(running.resources[role]["socket"].split("::")[2])
    with socket.create_connection(("127.0.0.1", port), timeout=5) as connection:
        for message in (*messages, "*OPC?"):
            connection.sendall(message.encode() + b"\n")
        assert connection.recv(100) == b"1\n"


def all_dark(told: Any) -> bool:
    return bool(told.of(SafeState)[-1].confirmed) and told.result["safe_state"]["confirmed"]


def test_light_left_on_is_turned_off_first(night: Any, lab: Any) -> None:
    """The attenuator has been reset to 0 dB, both lasers shine at 13 dBm: somebody left in a hurry."""

    def left_on(running: RunningSimulation) -> None:
        say(running, "attenuator", "*RST")
        for laser in ("signal_laser", "local_oscillator"):
            say(running, laser, "POW 13 DBM", "OUTP ON")

    told = night(lab.copy("power", "sequences", LIGHT_ONLY, of="power_log"), arrange=left_on)
    assert told.result["state"] == "finished"
    applied = [(str(event.setting.term), event.read_back) for event in told.of(Applied)]
    dark = applied.index(("signal_laser.output", False))
    opened = [place for place, (term, db) in enumerate(applied) if term == "attenuator.attenuation" and db < 59.9]
    assert opened and dark < opened[0]
    sent = [event.sent for event in told.of(Exchange)]
    assert not any("*RST" in message or "*RCL" in message for message in sent)
    assert told.truth["highest_diode_power_w"] < PHOTODIODE_LIMIT_W and not told.truth["damaged"]
    assert all_dark(told)


@pytest.mark.parametrize(
    ("instead", "expected"),
    [
        ('beyond = "refuse"', ("1552", "1553", "signal_laser", "-222")),
        ('beyond = "clip"', ("1552", "1553", "signal_laser")),
    ],
)
def test_refused_wavelength_ends_the_night(night: Any, lab: Any, instead: str, expected: tuple[str, ...]) -> None:
    """A laser that ends at 1552 nm is asked for 1553 nm, and refuses, or silently does what it can."""
    wavelength = (
        'reset = 1.55e-6\ngrid = 1e-13                                 # 0.1 pm\nsettles = "500 ms"\nopc_waits = true\n'
    )
    ends = {"highest = 1.570e-6": "highest = 1.552e-6", wavelength + 'beyond = "refuse"': wavelength + instead}
    lab.copy("laser", "simulated_instruments", ends)
    lab.copy("world", "simulated_instruments", {})
    bench = lab.copy("bench", "simulated_instruments", {})
    at = {'"signal_laser.wavelength" = "1550.12 nm"': '"signal_laser.wavelength" = "1553 nm"'}
    told = night(lab.copy("power", "sequences", LIGHT_ONLY | at, of="power_log"), bench)
    assert told.result["state"] == "gave up"
    assert all(word in told.result["reason"] for word in expected), told.result["reason"]
    assert told.result["missing"] == list(range(len(told.result["missing"]))) != []
    assert told.truth["highest_diode_power_w"] < 1e-6 and all_dark(told)


def test_rounded_wavelength_is_kept_as_it_is(night: Any, lab: Any) -> None:
    """0.4 pm beside what was asked lies within the driver's tolerance; what is stored is what the laser says."""
    coarse = {"grid = 1e-13                                 # 0.1 pm": "grid = 1e-12"}
    lab.copy("laser", "simulated_instruments", coarse)
    lab.copy("world", "simulated_instruments", {})
    bench = lab.copy("bench", "simulated_instruments", {})
    at = {'"signal_laser.wavelength" = "1550.12 nm"': '"signal_laser.wavelength" = "1550.1204 nm"'}
    told = night(lab.copy("power", "sequences", LIGHT_ONLY | at, of="power_log"), bench)
    assert told.result["state"] == "finished"
    asked = [event for event in told.of(Applied) if str(event.setting.term) == "signal_laser.wavelength"]
    assert asked and all(event.read_back == pytest.approx(1550.120, abs=1e-6) for event in asked)


def test_lost_trigger_counts_nothing_twice(night: Any, lab: Any, monkeypatch: pytest.MonkeyPatch) -> None:
    """From the second stay on nothing is armed, and the oscilloscope repeats its last record without a word."""

    def lose_the_trigger(running: RunningSimulation, event: Event) -> None:
        if isinstance(event, AttemptFinished):
            monkeypatch.setattr(Instrument, "_arm_and_wait", lambda self, record: None)

    told = night(lab.sequence(), meanwhile=lose_the_trigger)
    stays = told.of(AttemptFinished)
    assert told.result["state"] == "gave up" and "repeat" in told.result["reason"]
    # one stay had been demodulated and one was under way when the trigger was lost
    assert [stay.outcome for stay in stays[:2]] == ["ok", "ok"]
    assert {stay.outcome for stay in stays[2:]} == {"failed"}
    counted = sum(demodulation.bits for stay in stays[:2] for demodulation in stay.demodulations)
    assert sum(point["bits"] for point in told.result["points"]) == counted > 0
    assert any(check["name"] == "duplicate capture" and check["finding"] == "bad" for check in told.result["findings"])
    assert all_dark(told)


def test_dead_instrument_ends_it_and_is_named(night: Any, lab: Any) -> None:
    """The attenuator answers nothing any more: the lasers are dark all the same, and it is said to be unconfirmed."""

    def dies(running: RunningSimulation, event: Event) -> None:
        if isinstance(event, AttemptFinished):
            running.control.fault("attenuator", "drop", count=1000)

    told = night(lab.copy("power", "sequences", LIGHT_ONLY, of="power_log"), meanwhile=dies)
    assert told.result["state"] == "gave up" and "attenuator" in told.result["reason"]
    steps = {step["role"]: step["confirmed"] for step in told.result["safe_state"]["steps"]}
    assert steps == {"attenuator": False, "signal_laser": True, "local_oscillator": True}
    assert told.result["safe_state"]["confirmed"] is False
    outcomes = [stay.outcome for stay in told.of(AttemptFinished)]
    assert "ok" in outcomes and outcomes[-1] == "failed"
    assert told.result["missing"]


def test_full_disk_leaves_a_dark_bench(night: Any, lab: Any, monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    """Storage fails in the middle of the night: what it had is kept, the rest stands in a side file."""
    record, full = RunWriter.record, [False]

    def fills_up(self: RunWriter, event: Event) -> None:
        if full[0]:
            raise StorageError("The disk is full. Make room.")
        record(self, event)

    def fill(running: RunningSimulation, event: Event) -> None:
        full[0] = full[0] or isinstance(event, AttemptFinished)
        truth.append(running.control.truth())

    truth: list[Any] = []
    monkeypatch.setattr(RunWriter, "record", fills_up)
    with pytest.raises(StorageError):
        night(lab.copy("power", "sequences", LIGHT_ONLY, of="power_log"), meanwhile=fill)
    assert truth[-1]["receiver_power_w"] < 1e-12 < truth[-2]["receiver_power_w"]
    words = (tmp_path / "log" / "last_words.jsonl").read_text("utf-8")
    assert "SafeState" in words and "confirmed=True" in words and "SegmentEnded" in words
    with sqlite3.connect(tmp_path / "log" / "logbook.db") as logbook:
        assert logbook.execute("SELECT count(*) FROM attempt").fetchone()[0] == 1


@pytest.mark.parametrize(
    ("lane", "words"),
    [
        ({"channel = 3\n": "channel = 4\n", "channel = 4\n": "channel = 3\n"}, "YI and YQ are exchanged"),
        ({'skew = "2.0 ps"\ninverted = false': 'skew = "2.0 ps"\ninverted = true'}, "XI and XQ are exchanged, or one"),
    ],
    ids=["swapped", "inverted"],
)
def test_wrong_lanes_are_named(night: Any, lab: Any, lane: dict[str, str], words: str) -> None:
    """Every lane counts as few errors as ever; its place or sign in the bench file is wrong all the same."""
    lab.copy("world", "simulated_instruments", {})
    bench = lab.copy("bench", "simulated_instruments", {})
    text = bench.read_text("utf-8")
    if len(lane) == 2:
        text = text.replace("channel = 3\n", "channel = X\n").replace("channel = 4\n", "channel = 3\n")
        text = text.replace("channel = X\n", "channel = 4\n")
    else:
        ((old, new),) = lane.items()
        assert text.count(old) == 1
        text = text.replace(old, new)
    bench.write_text(text, "utf-8")
    brief = {"passes = 2": "passes = 1", 'to = "-37 dBm"': 'to = "-38.5 dBm"'}
    told = night(lab.sequence(brief), bench)
    assert told.result["state"] == "finished"
    lanes = next(check for check in told.result["findings"] if check["name"] == "lane map")
    assert lanes["finding"] == "doubtful" and words in lanes["words"]
    assert all(0 < point["ber"] < 0.02 for point in told.result["points"])


def test_unopened_bench_is_made_dark(night: Any, lab: Any) -> None:
    """One address is dead, so nothing is measured; what a previous user left on is turned off all the same."""

    with socket.socket() as nobody:
        nobody.bind(("127.0.0.1", 0))

        def left_on(running: RunningSimulation) -> None:
            say(running, "attenuator", "INP:ATT 5")
            say(running, "signal_laser", "POW 10 DBM", "OUTP ON")
            running.resources["receiver"]["socket"] = f"TCPIP::127.0.0.1::{nobody.getsockname()[1]}::SOCKET"

        told = night(lab.copy("power", "sequences", LIGHT_ONLY, of="power_log"), arrange=left_on)
    assert told.result["state"] == "gave up" and "receiver" in told.result["reason"]
    assert not told.of(Applied)
    assert all_dark(told)
