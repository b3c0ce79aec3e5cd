"""The guard process against sockets of this process: whatever happens to the runner, the sources end dark."""

from __future__ import annotations

import json
import os
import signal
import socket
import subprocess
import sys
import textwrap
import threading
import time
from collections.abc import Iterator
from contextlib import suppress
from dataclasses import asdict
from pathlib import Path

import pytest

from owlight.guard import Guard
from owlight.guard.orders import Orders
from owlight.vocabulary.plan import SafeStep

DEADLINE_S = 20.0  # a hang shows as a failure; on an idle machine each case takes about a second


class Switch:
    """One raw socket instrument with one setting; a single connection at a time, as the cheapest real ones."""

    def __init__(self, serial: str, setting: str, value: str) -> None:
        self.serial, self.setting, self.value = serial, setting, value
        self.changed_s: float | None = None
        self._listener = socket.create_server(("127.0.0.1", 0))
        self.resource = f"TCPIP::127.0.0.1::{self._listener.getsockname()[1]}::SOCKET"
        threading.Thread(target=self._serve, daemon=True).start()

    def _serve(self) -> None:
        with suppress(OSError):
            while True:
                wire, _ = self._listener.accept()
                with suppress(OSError), wire, wire.makefile("rb") as lines:
                    for line in lines:
                        self._hear(wire, line.decode().strip())

    def _hear(self, wire: socket.socket, message: str) -> None:
        if message == "*IDN?":
            wire.sendall(f"maker,model,{self.serial},1\n".encode())
        elif message == f"{self.setting}?":
            wire.sendall(f"{self.value}\n".encode())
        elif message.startswith(f"{self.setting} "):
            self.value, self.changed_s = message.split()[1], time.monotonic()

    def close(self) -> None:
        self._listener.close()


@pytest.fixture
def bench() -> Iterator[dict[str, Switch]]:
    switches = {
        "attenuator": Switch("AT", "INP:ATT", "12"),
        "signal_laser": Switch("SL", "OUTP:STAT", "1"),
        "local_oscillator": Switch("LO", "OUTP:STAT", "1"),
    }
    yield switches
    for switch in switches.values():
        switch.close()


def steps(bench: dict[str, Switch]) -> tuple[SafeStep, ...]:
    def step(role: str, command: str, query: str, expected: float | bool, tolerance: float | None) -> SafeStep:
        switch = bench[role]
        return SafeStep(role, switch.resource, switch.serial, command, query, expected, tolerance, f"{role} dark")

    return (
        step("attenuator", "INP:ATT 60", "INP:ATT?", 60.0, 0.02),
        step("signal_laser", "OUTP:STAT 0", "OUTP:STAT?", False, None),
        step("local_oscillator", "OUTP:STAT 0", "OUTP:STAT?", False, None),
    )


def dark(bench: dict[str, Switch]) -> bool:
    return [switch.value for switch in bench.values()] == ["60", "0", "0"]


RUNNER = """
    import sys, time
    from pathlib import Path
    from owlight.guard import Guard
    from owlight.guard.orders import Orders

    orders = Orders.from_line(sys.stdin.readline())
    guard = Guard.start(orders.steps, orders.silence_s, Path(orders.log), orders.end_after_s)
    print("started", flush=True)
    while True:
        if BEATS:
            guard.beat()
        time.sleep(0.02)
"""


def runner(bench: dict[str, Switch], log: Path, silence_s: float, end_after_s: float | None, beats: bool):
    text = textwrap.dedent(RUNNER).replace("BEATS", str(beats))
    process = subprocess.Popen([sys.executable, "-c", text], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True)
    process.stdin.write(Orders(steps(bench), silence_s, 0, str(log), end_after_s).to_line() + "\n")
    process.stdin.flush()
    assert process.stdout.readline() == "started\n"
    return process


def line_of(log: Path) -> dict:
    end_s = time.monotonic() + DEADLINE_S
    while time.monotonic() < end_s:
        if log.exists() and log.read_text().endswith("\n"):
            return json.loads(log.read_text().splitlines()[-1])
        time.sleep(0.01)
    raise AssertionError("the guard wrote nothing")


@pytest.mark.skipif(os.name != "posix", reason="SIGKILL")
def test_killed_runner_leaves_a_dark_bench(bench: dict[str, Switch], tmp_path: Path) -> None:
    process = runner(bench, tmp_path / "guard.jsonl", 30.0, None, beats=True)
    process.send_signal(signal.SIGKILL)
    killed_s = time.monotonic()
    process.wait()
    found = line_of(tmp_path / "guard.jsonl")
    assert dark(bench) and found["confirmed"] is True
    assert [step["confirmed"] for step in found["steps"]] == [True, True, True]
    assert "ended without saying so" in found["reason"] and found["runner_pid"] == process.pid
    assert bench["attenuator"].changed_s < bench["signal_laser"].changed_s < bench["local_oscillator"].changed_s
    assert bench["local_oscillator"].changed_s - killed_s < 5.0  # 3 x 2 s is the bound, a second the rule


@pytest.mark.skipif(os.name != "posix", reason="SIGKILL")
def test_hanging_runner_is_ended_and_made_safe(bench: dict[str, Switch], tmp_path: Path) -> None:
    process = runner(bench, tmp_path / "guard.jsonl", 0.3, None, beats=False)
    found = line_of(tmp_path / "guard.jsonl")
    assert process.wait(DEADLINE_S) == -signal.SIGTERM  # this runner has no handler, so asking is enough
    assert dark(bench) and found["confirmed"] and "no sign of life for 0.3 s" in found["reason"]


@pytest.mark.skipif(os.name != "posix", reason="SIGTERM")
def test_latest_end_counts_on_a_healthy_runner(bench: dict[str, Switch], tmp_path: Path) -> None:
    process = runner(bench, tmp_path / "guard.jsonl", 30.0, 0.5, beats=True)
    found = line_of(tmp_path / "guard.jsonl")
    process.wait(DEADLINE_S)
    assert dark(bench) and "latest end" in found["reason"]


@pytest.mark.skipif(os.name != "posix", reason="SIGKILL")
def test_one_dead_instrument_does_not_keep_the_others_lit(bench: dict[str, Switch], tmp_path: Path) -> None:
    bench["attenuator"].close()
    dead = socket.create_server(("127.0.0.1", 0))  # accepts and never speaks
    bench["attenuator"].resource = f"TCPIP::127.0.0.1::{dead.getsockname()[1]}::SOCKET"
    process = runner(bench, tmp_path / "guard.jsonl", 30.0, None, beats=True)
    process.kill()
    killed_s = time.monotonic()
    process.wait()
    found = line_of(tmp_path / "guard.jsonl")
    assert found["confirmed"] is False
    assert [(step["role"], step["confirmed"]) for step in found["steps"]] == [
        ("signal_laser", True),
        ("local_oscillator", True),
        ("attenuator", False),
    ]
    # half a second of knocking at the attenuator and not its whole two: an open one lets the light through
    assert bench["local_oscillator"].changed_s - killed_s < 2.0
    assert bench["signal_laser"].value == bench["local_oscillator"].value == "0"
    dead.close()


def test_orderly_end_touches_nothing(bench: dict[str, Switch], tmp_path: Path) -> None:
    guard = Guard.start(steps(bench), 30.0, tmp_path / "guard.jsonl", None)
    for _ in range(3):
        guard.beat()
    assert guard.alive
    guard.done()
    assert not guard.alive and not (tmp_path / "guard.jsonl").exists()
    assert [switch.value for switch in bench.values()] == ["12", "1", "1"]


def test_guard_takes_over_from_a_living_runner(bench: dict[str, Switch], tmp_path: Path) -> None:
    """The runner could not confirm the safe state: the guard tries, and does not end who asked it to."""
    guard = Guard.start(steps(bench), 30.0, tmp_path / "guard.jsonl", None)
    guard.take_over()
    found = line_of(tmp_path / "guard.jsonl")
    assert dark(bench) and found["confirmed"] is True
    assert found["reason"] == "the runner could not confirm the safe state"


def test_dead_guard_is_told_once(bench: dict[str, Switch], tmp_path: Path) -> None:
    from owlight.errors import BenchError

    guard = Guard.start(steps(bench), 30.0, tmp_path / "guard.jsonl", None)
    guard._process.kill()
    guard._process.wait()
    with pytest.raises(BenchError, match="guard process is gone"):
        guard.beat()
    guard.beat()  # making the bench safe must not be interrupted by it again
    guard.done()


def test_orders_survive_their_line(bench: dict[str, Switch]) -> None:
    orders = Orders(steps(bench), 1.5, 17, "/somewhere/guard.jsonl", None)
    again = Orders.from_line(orders.to_line())
    assert again == orders and asdict(again) == asdict(orders)
    assert [type(step.expected) for step in again.steps] == [float, bool, bool]
