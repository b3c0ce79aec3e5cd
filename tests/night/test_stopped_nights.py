"""Real signals to a real process: Ctrl-C once and twice, SIGTERM, and the death that nobody can announce."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import time
from pathlib import Path
from typing import Any

import pytest

posix_signals = pytest.mark.skipif(os.name != "posix", reason="signals between processes are another thing there")

# light and readings only: whole stays pass in a tenth of a second, and no demodulation has to be started
LONG = {
    'setting = "attenuator.attenuation"': 'setting = "received_power"',
    '"15 dB"': '"-34 dBm"',
    '"30 dB"': '"-26 dBm"',
    "passes = 2": "passes = 40",
}


def until(process: subprocess.Popen[str], words: str) -> str:
    """What it said up to the line with `words`."""
    assert process.stderr is not None
    said = ""
    for line in process.stderr:
        said += line
        if words in line:
            return said
    pytest.fail(f"{words!r} was never said:\n{said}")


def ended(process: subprocess.Popen[str]) -> tuple[int, str, str]:
    out, err = process.communicate(timeout=60)
    assert "Traceback" not in err, err
    return process.returncode, out, err


@posix_signals
@pytest.mark.parametrize(
    ("signals", "reasons"),
    [
        ([signal.SIGINT], {"stopped by a person"}),
        # what comes too late to interrupt anything finds the point in hand already finished
        ([signal.SIGINT, signal.SIGINT], {"stopped at once by a person", "stopped by a person"}),
        ([signal.SIGTERM], {"stopped at once by a person", "stopped by a person"}),
    ],
    ids=["Ctrl-C once", "Ctrl-C twice", "SIGTERM"],
)
def test_stopped_night_is_dark_and_stored(
    lab: Any, start: Any, command: Any, signals: list[int], reasons: set[str]
) -> None:
    sequence = lab.copy("power", "sequences", LONG, of="power_log")
    process = start("run", sequence, "--bench", "bench", "--logbook", lab.folder / "log", "--json")
    until(process, "  3/")
    began_s = time.monotonic()
    process.send_signal(signals[0])
    heard = until(process, "safe")  # "Finishing this point, then making the bench safe", or "Making the bench safe now"
    for number in signals[1:]:
        process.send_signal(number)
    status, _, err = ended(process)
    assert status == 130
    # a second Ctrl-C that comes while the result is printed ends the printing, so the logbook is asked
    found = command("show", "last", "--logbook", lab.folder / "log", "--json").json
    # three steps of at most two seconds each, and what a loaded machine needs for conclusion and report
    assert time.monotonic() - began_s < 30
    assert found["state"] == "called off" and found["reason"] in reasons
    assert found["safe_state"]["confirmed"] and "Bench safe, confirmed." in heard + err
    assert 2 <= found["stays_done"] < found["stays_planned"]


@posix_signals
def test_killed_night_is_made_safe_by_its_guard(lab: Any, start: Any, command: Any) -> None:
    """kill -9: nothing of the program is left but the guard, and the logbook says that the run broke off."""
    log = lab.folder / "log"
    sequence = lab.copy("power", "sequences", LONG, of="power_log")
    process = start("run", sequence, "--bench", "bench", "--logbook", log)
    until(process, "  3/")
    process.kill()
    process.wait()
    words = awaited(log / "guard.jsonl")
    assert words["confirmed"] is True and words["runner_pid"] == process.pid and len(words["steps"]) == 3
    found = command("show", "last", "--logbook", log, "--json").json
    assert found["state"] == "broken off" and found["stays_done"] >= 2 and found["missing"]
    assert found["safe_state"]["confirmed"] is True and found["safe_state"]["by"].startswith("the guard at ")
    assert "confirmed by read-back, by the guard" in command("show", "last", "--logbook", log).out


def awaited(path: Path) -> dict[str, Any]:
    """The guard's first line; it writes when the bench is dark."""
    for _ in range(200):
        if path.exists() and path.read_text("utf-8").endswith("\n"):
            found: dict[str, Any] = json.loads(path.read_text("utf-8").splitlines()[0])
            return found
        time.sleep(0.1)
    pytest.fail("the guard wrote nothing")


@posix_signals
def test_one_bench_serves_one_night(lab: Any, start: Any, command: Any) -> None:
    """Two bench files name the same instruments by different addresses; the serial numbers give it away."""
    server = start("simulate", "bench", "--json")
    assert server.stdout is not None
    roles = json.loads(server.stdout.readline())
    assert set(roles["attenuator"]) == {"hislip", "socket"}
    benches = {transport: bench_of(lab, roles, transport) for transport in ("hislip", "socket")}
    sequence = lab.copy("power", "sequences", LONG, of="power_log")
    first = start("run", sequence, "--bench", benches["hislip"], "--logbook", lab.folder / "one")
    until(first, "stays at")  # the bench is open then
    second = command("run", sequence, "--bench", benches["socket"], "--logbook", lab.folder / "two", "--json")
    assert second.status == 3
    reason = second.json["reason"]
    assert "OWL-SL-0001" in reason and f"process {first.pid}" in reason and "since" in reason
    assert second.json["state"] == "gave up" and second.json["stays_done"] == 0
    first.send_signal(signal.SIGTERM)
    assert ended(first)[0] == 130
    server.send_signal(signal.SIGTERM)
    assert ended(server)[0] == 0


def bench_of(lab: Any, roles: dict[str, dict[str, str]], transport: str) -> Path:
    """The demo bench with real addresses, as a bench of one's own would have them."""
    text = lab.copy("bench", "simulated_instruments", {'[simulation]\nworld = "world.toml"\n': ""}).read_text("utf-8")
    lines, role = [], ""
    for line in text.splitlines():
        role = line[6:-1] if line.startswith("[role.") else role
        lines.append(f'resource = "{roles[role][transport]}"' if line.startswith("resource = ") else line)
    path: Path = lab.write(transport, "\n".join(lines) + "\n")
    return path
