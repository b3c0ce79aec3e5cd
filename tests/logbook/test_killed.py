"""A writer killed at a random moment loses no stay it said was stored."""

from __future__ import annotations

import random
import signal
import sqlite3
import subprocess
import sys
from pathlib import Path

import pytest

from owlight.logbook import Logbook, Provenance
from owlight.logbook.read import open_reader, runs

WRITER = """
import importlib.util, sys
from pathlib import Path
spec = importlib.util.spec_from_file_location("story", sys.argv[1])
story_module = importlib.util.module_from_spec(spec)
sys.modules["story"] = story_module
spec.loader.exec_module(story_module)
from owlight.logbook import Logbook
from owlight.vocabulary.events import SegmentStarted
plan, story = story_module.make_plan(), story_module.Story()
with Logbook.open(Path(sys.argv[2])) as logbook:
    writer = logbook.start_run(plan, story_module.PROVENANCE)
    writer.record(SegmentStarted(story.stamp(), 1, "started"))
    for attempt in range(1, 10_000):
        writer.record(story.capture(0, attempt))
        writer.record(story.stay(plan, 0, attempt, errors=attempt))
        print(attempt, flush=True)
"""


@pytest.mark.parametrize("seed", range(5))
def test_killed_writer_loses_nothing(tmp_path: Path, seed: int) -> None:
    conftest = Path(__file__).parent / "conftest.py"
    command = [sys.executable, "-c", WRITER, str(conftest), str(tmp_path)]
    process = subprocess.Popen(command, stdout=subprocess.PIPE, text=True)
    assert process.stdout is not None
    acknowledged = 0
    for _ in range(random.Random(seed).randint(1, 40)):
        acknowledged = int(process.stdout.readline())
    process.send_signal(signal.SIGKILL)
    rest = process.communicate()[0].split()
    acknowledged = int(rest[-1]) if rest else acknowledged
    connection = sqlite3.connect(tmp_path / "logbook.db")
    assert connection.execute("PRAGMA integrity_check").fetchone()[0] == "ok"
    attempts = [row[0] for row in connection.execute("SELECT attempt FROM attempt ORDER BY attempt")]
    assert attempts == list(range(1, len(attempts) + 1)) and len(attempts) >= acknowledged
    assert connection.execute("SELECT count(*) FROM capture_missing").fetchone()[0] == 0
    run = connection.execute("SELECT run FROM run").fetchone()[0]
    stored = sqlite3.connect(tmp_path / "captures" / f"{run}.db")
    assert stored.execute("SELECT count(DISTINCT attempt) FROM waveform").fetchone()[0] >= len(attempts)
    stored.close()
    _goes_on(tmp_path, run, len(attempts))


def _goes_on(folder: Path, run: str, stays: int) -> None:
    """The run is known as broken off, its orphans are dropped, and the next stay fits."""
    with open_reader(folder) as reader:
        assert runs.header(reader, run).state == "broken off"
    with Logbook.open(folder) as logbook:
        writer = logbook.continue_run(run, Provenance({"owlight": "0.1.0"}, "host", "a person", "owlight resume"))
        writer.close()
    stored = sqlite3.connect(folder / "captures" / f"{run}.db")
    assert stored.execute("SELECT count(DISTINCT attempt) FROM waveform").fetchone()[0] == stays
