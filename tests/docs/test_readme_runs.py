"""Every command that README.md shows is run, in the order it is shown, in a lab folder with a short sequence.

`python3 src` and `.venv/bin/` name an environment that a test does not build: this test's own stands in for them.
"""

from __future__ import annotations

import os
import re
import shlex
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from owlight import shipped
from owlight.logbook import read
from owlight.logbook.read import captures, history, runs
from owlight.vocabulary.captures import Capture

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text("utf-8")
SHORT = {"symbols = 100_000": "symbols = 20_000", "passes = 3": "passes = 1", '"0.5 dB"': '"1 dB"'}
ELSEWHERE = {"python3 tests", "py -3 tests", "py -3 src demo"}  # see test_developers; the others need another system
BENCH, SEQUENCE = "simulated_instruments/bench.toml", "sequences/qpsk_sensitivity.toml"


def commands() -> list[str]:
    """Console blocks line by line, and what stands in the text between back ticks, in their order."""
    shown = re.findall(r"```console\n(.*?)```|`([^`\n]+)`", README, re.DOTALL)
    lines = [line for block, inline in shown for line in (block.splitlines() or [inline])]
    starts = ("python3 ", "py -3 ", ".venv/bin/")
    return list(dict.fromkeys(line for line in lines if line.startswith(starts) and line not in ELSEWHERE))


def short_sequence() -> str:
    """The shipped sequence without warm-up and reference, with few powers and short records."""
    text = shipped.find("sequences", "qpsk_sensitivity").read_text("utf-8")
    for table in (r"\[\[before\]\]", r"\[reference\]"):
        text, found = re.subn(table + r"[^\[]*?\n(?=\n?\[)", "", text)
        assert found == 1, table
    for old, new in SHORT.items():
        assert text.count(old) == 1, old
        text = text.replace(old, new)
    return text


@pytest.fixture(scope="module")
def lab(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A lab folder as the README describes it; its own sequence comes before the shipped one of that name."""
    folder = tmp_path_factory.mktemp("lab of mine")
    (folder / "sequences").mkdir()
    (folder / SEQUENCE).write_text(short_sequence(), "utf-8")
    (folder / "my_sequence.toml").write_text(short_sequence(), "utf-8")
    (folder / "my_bench.toml").write_text(shipped.find("simulated_instruments", "bench").read_text("utf-8"), "utf-8")
    return folder


def in_this_environment(line: str) -> list[str]:
    words = shlex.split(line)
    if words[:2] == ["python3", "src"]:
        return [sys.executable, "-m", "owlight", *words[2:]]
    if words[0] == ".venv/bin/sqlite-utils":
        return [sys.executable, "-m", "sqlite_utils", *words[1:]]
    raise AssertionError(f"the README shows {line!r}, and no test runs it")


def ran(line: str, folder: Path) -> str:
    surroundings = {**os.environ, "PYTHONPATH": str(ROOT / "src"), "COLUMNS": "200"}
    found = subprocess.run(
        in_this_environment(line), cwd=folder, env=surroundings, capture_output=True, encoding="utf-8", timeout=120
    )
    # 1: measured, but so few short records leave a finding
    assert found.returncode in ((0, 1) if {"demo", "run"} & set(line.split()) else (0,)), f"{line}\n{found.stderr}"
    return found.stdout


def first_capture(logbook: Path) -> Capture:
    with read.open_reader(logbook) as reader:
        run_id = runs.find_run(reader, "last")
        stay = history.history(reader, run_id)[0]
    return captures.load(logbook, run_id, stay.demodulations[0].capture)


@pytest.fixture(scope="module")
def said(lab: Path) -> dict[str, str]:
    """What each command printed."""
    found = {}
    for line in commands():
        if "capture.npz" in line:
            codes = np.array([lane.codes for lane in first_capture(lab / "owlight-demo").lanes])
            np.savez(lab / "capture.npz", codes=codes)
        found[line] = ran(line, lab)
    return found


def test_every_command_runs(said: dict[str, str]) -> None:
    verbs = {shlex.split(line)[2] for line in said if line.startswith("python3 src")}
    assert verbs >= {"demo", "identify", "forecast", "run", "show", "report", "demodulate", "reproduce"}


def test_demo_ends_as_promised(said: dict[str, str]) -> None:
    words = said["python3 src demo"]
    for promised in ("Sensitivity", "Findings", "confirmed", "report_", "SIMULATED", "receiver signal input"):
        assert promised in words, promised


def test_query_gives_the_curve(said: dict[str, str]) -> None:
    (words,) = (words for line, words in said.items() if "sqlite-utils" in line)
    header, _, *rows = words.splitlines()
    assert header.split() == ["received_power_dbm", "errors", "bits", "ber"]
    counted = [[float(cell) for cell in row.split()] for row in rows]
    # the table shows six digits
    assert len(counted) == 5 and all(errors / bits == pytest.approx(ber, rel=1e-5) for _, errors, bits, ber in counted)


def test_foreign_capture_locks(said: dict[str, str]) -> None:
    (words,) = (words for line, words in said.items() if "demodulate" in line)
    assert re.search(r"(?m)^locked", words)


def test_reproduction_is_identical(said: dict[str, str]) -> None:
    (words,) = (words for line, words in said.items() if "reproduce" in line)
    assert "byte for byte" in words or "identical" in words
    assert "not identical" not in words


def test_own_addresses_can_be_planned(lab: Path) -> None:
    """Step 1: the bench file without [simulation], with the addresses that the README writes."""
    hislip, raw = re.findall(r"`(TCPIP::[^`]+)`", README)
    text, found = re.subn(r"(?m)^\[simulation\]\n(?:[^\[\n].*\n)*", "", (lab / "my_bench.toml").read_text("utf-8"))
    assert found == 1
    text = text.replace('"simulated hislip"', f'"{hislip}"').replace('"simulated socket"', f'"{raw}"')
    assert "simulated hislip" not in text and hislip in text
    (lab / "real.toml").write_text(text, "utf-8")
    words = ran("python3 src forecast my_sequence.toml --bench real.toml", lab)
    assert "simulated" not in words.lower()


@pytest.mark.parametrize("name", shipped.names("sequences"))
def test_shipped_sequence_can_be_planned(name: str, tmp_path: Path) -> None:
    assert f"`{name}`" in README, "a sequence that nobody is told of"
    assert ran(f"python3 src forecast {name} --bench bench", tmp_path)
