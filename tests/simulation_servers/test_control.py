"""The control port and the process: simulated time, keys, damage as it truly is, faults, the end."""

from __future__ import annotations

import json
import os
import socket
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

from owlight import simulation
from owlight.errors import BenchError, InputError


@pytest.fixture(scope="module")
def running(world_path: Path) -> Iterator[simulation.RunningSimulation]:
    running = simulation.start(world_path)
    yield running
    running.stop()


@pytest.fixture
def fresh(running: simulation.RunningSimulation) -> simulation.RunningSimulation:
    running.control.reset()
    return running


class Plain:
    """A bare socket to one instrument."""

    def __init__(self, running, role: str) -> None:
        port = int(running.resources[role]["socket"].split("::")[2])
        self._socket = socket.create_connection(("127.0.0.1", port), timeout=5)
        self._lines = self._socket.makefile("rb")

    def tell(self, message: str) -> None:
        self._socket.sendall(message.encode() + b"\n")

    def line(self) -> bytes:
        return self._lines.readline()

    def ask(self, message: str) -> str:
        self.tell(message)
        return self.line().decode().strip()

    def block(self, size: int) -> bytes:
        header = len(str(size)) + 2
        return self._lines.read(header + size + 1)[header:-1]

    def patience(self, seconds: float) -> None:
        self._socket.settimeout(seconds)

    def __enter__(self):
        return self

    def __exit__(self, *_):
        self._lines.close()
        self._socket.close()


def test_sleeping_moves_simulated_time(fresh):
    began_s, utc = fresh.clock.monotonic_s(), fresh.clock.utc()
    fresh.clock.sleep(43_200.0)  # a night, at once
    assert fresh.clock.monotonic_s() - began_s == pytest.approx(43_200.0, abs=1e-6)
    assert fresh.clock.utc()[:13] != utc[:13]


def test_latency_moves_time_without_sleep(fresh):
    began_s = fresh.clock.monotonic_s()
    with Plain(fresh, "attenuator") as attenuator:
        assert attenuator.ask("INP:ATT 60;*OPC?") == "1"
    assert fresh.clock.monotonic_s() - began_s == pytest.approx(0.4, abs=0.01)  # what its file declares


def _record(running, seed):
    running.control.next_capture(seed, 100.0)
    with Plain(running, "oscilloscope") as scope:
        scope.ask("SENS:SWE:POIN 2000;:INIT;*OPC?")
        scope.tell("FETC:VOLT3?")
        return scope.block(2000)


def test_same_key_gives_same_bytes_in_another_process(fresh, world_path):
    first = _record(fresh, 5)
    fresh.clock.sleep(1000.0)
    assert _record(fresh, 5) == first
    assert _record(fresh, 6) != first
    other = simulation.start(world_path)
    try:
        assert _record(other, 5) == first
    finally:
        other.stop()


def test_readings_are_keyed_too(fresh):
    def reading():
        fresh.control.next_capture(9, 50.0)
        with Plain(fresh, "power_meter") as meter:
            return [meter.ask("READ?") for _ in range(3)]

    first = reading()
    assert len(set(first)) == 3
    assert reading() == first


def test_truth_tells_overdriven_photodiode(fresh):
    with Plain(fresh, "local_oscillator") as lo, Plain(fresh, "signal_laser") as laser:
        lo.ask("SOUR:POW 16;:OUTP ON;*OPC?")
        laser.ask("SOUR:POW 16;:OUTP ON;*OPC?")  # the attenuator stands at 0 dB, as after every power-up
    fresh.clock.sleep(1.0)
    truth = fresh.control.truth()
    with Plain(fresh, "receiver") as receiver:
        damaged = int(receiver.ask("SENS:DAM:COUN?"))
    assert truth["highest_diode_power_w"] >= truth["diode_peak_power_w"] > 0.0
    assert damaged == len(truth["damaged"])


def test_reset_gives_a_new_bench(fresh):
    with Plain(fresh, "signal_laser") as laser:
        laser.ask("OUTP ON;*ESR?")
        fresh.clock.sleep(1.0)
        fresh.control.reset()
        assert laser.ask("OUTP?;*ESR?") == "0;128"
    assert fresh.control.now_s() < 0.1


def test_wrong_words_are_refused(fresh):
    with pytest.raises(BenchError, match="next_capture"):
        fresh.control.ask("prev_capture")
    with pytest.raises(BenchError, match="forwards"):
        fresh.control.advance(-1.0)
    with pytest.raises(BenchError, match="garbled"):
        fresh.control.fault("attenuator", "haunted")
    assert fresh.control.now_s() < 0.1


# ---- faults ----


def test_missing_answer_was_executed_all_the_same(fresh):
    fresh.control.fault("attenuator", "missing")
    with Plain(fresh, "attenuator") as attenuator:
        attenuator.tell("INP:ATT 33;*OPC?")
        assert float(attenuator.ask("INP:ATT?")) == 33.0


def test_late_answer_comes_late(fresh):
    fresh.control.fault("attenuator", "late", seconds=0.2)
    with Plain(fresh, "attenuator") as attenuator:
        attenuator.tell("*OPC?")
        attenuator.patience(0.05)
        with pytest.raises(TimeoutError):
            attenuator.line()
    with Plain(fresh, "attenuator") as attenuator:
        assert attenuator.ask("*ESR?") == "128"  # the fault is spent, and the old answer went with its session


def test_half_an_answer_has_no_end(fresh):
    fresh.control.fault("power_meter", "half")
    with Plain(fresh, "power_meter") as meter:
        meter.tell("SYST:VERS?")
        meter.patience(0.05)
        with pytest.raises(TimeoutError):
            meter.line()


def test_garbled_and_stale_answers_come_in_time(fresh):
    with Plain(fresh, "power_meter") as meter:
        fresh.control.fault("power_meter", "garbled")
        assert meter.ask("SYST:VERS?") not in ("", "1999.0")
        fresh.control.fault("power_meter", "stale", count=2)
        assert [meter.ask("*ESR?"), meter.ask("*OPC?"), meter.ask("*ESR?")] == ["1999.0", "128", "0"]


def test_dropped_connection_is_closed(fresh):
    fresh.control.fault("oscilloscope", "drop")
    with Plain(fresh, "power_meter") as meter, Plain(fresh, "oscilloscope") as scope:
        assert scope.ask("*OPC?") == ""
        assert meter.ask("*OPC?") == "1"  # the others are not touched
    with Plain(fresh, "oscilloscope") as scope:
        assert scope.ask("*OPC?") == "1"


# ---- the process ----


def test_wrong_world_is_told_line_by_line(tmp_path):
    world = tmp_path / "world.toml"
    world.write_text('world = "x"\nformat_version = 1\nmoon = 3\n[instruments]\nsignal_laser = "laser"\n')
    with pytest.raises(InputError, match=r"world\.toml:3"):
        simulation.start(world)


def test_missing_world_is_told():
    with pytest.raises(InputError, match=r"no_world\.toml"):
        simulation.start(Path("no_world.toml"))


def test_process_logs_and_ends_when_nobody_needs_it(world_path):
    source = str(Path(simulation.__file__).parents[2])
    process = subprocess.Popen(
        [sys.executable, "-m", "owlight.simulation", str(world_path), "--stepped", "--log", "--grace", "0.1"],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        env=os.environ | {"PYTHONPATH": source},
    )
    assert process.stdin is not None and process.stdout is not None and process.stderr is not None
    announced = json.loads(process.stdout.readline())
    port = int(announced["roles"]["receiver"]["socket"].split("::")[2])
    with socket.create_connection(("127.0.0.1", port), timeout=5) as client:
        process.stdin.close()  # the starter is gone, but somebody is still connected
        client.sendall(b"SYST:VERS?\n")
        assert client.recv(64) == b"1999.0\n"
    assert process.wait(timeout=10) == 0
    assert b"receiver < SYST:VERS? receiver > '1999.0" in process.stderr.read()
    process.stdout.close()
    process.stderr.close()
