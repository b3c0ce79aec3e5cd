"""Whole nights on the simulated bench: as a person starts them, and in this process where a test must interfere."""

from __future__ import annotations

import json
import os
import re
import subprocess
import sys
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pytest

from owlight import shipped, simulation
from owlight.jobs.night import Measured, Order, measure
from owlight.jobs.resolve import resolve, world_path
from owlight.jobs.summary import summary
from owlight.simulation import RunningSimulation
from owlight.vocabulary.events import Event

ROOT = Path(__file__).parents[2]
Json = dict[str, Any]
Changes = dict[str, str]


def changed(text: str, changes: Changes) -> str:
    for old, new in changes.items():
        assert text.count(old) == 1, old
        text = text.replace(old, new)
    return text


def short_sequence(changes: Changes | None = None) -> str:
    """The demo's sequence: five powers, two passes, short records, no warm-up and no reference point."""
    text = shipped.find("sequences", "qpsk_sensitivity").read_text("utf-8")
    for table in (r"\[\[before\]\]", r"\[reference\]"):
        text, found = re.subn(table + r"[^\[]*?\n(?=\n?\[)", "", text)
        assert found == 1, table
    short = {"symbols = 100_000": "symbols = 20_000", "passes = 3": "passes = 2", '"-40 dBm"': '"-39 dBm"'}
    return changed(changed(text, short | {'to = "-36 dBm"': 'to = "-37 dBm"'}), changes or {})


@dataclass(frozen=True)
class Answer:
    status: int
    out: str
    err: str

    @property
    def json(self) -> Json:
        found: Json = json.loads(self.out)
        return found


def command(*arguments: str | Path, cwd: Path | None = None) -> Answer:
    """`owlight ARGUMENTS` in a process of its own, without a terminal."""
    done = subprocess.run(
        [sys.executable, "-m", "owlight", *map(str, arguments)],
        capture_output=True,
        text=True,
        encoding="utf-8",
        timeout=120,
        cwd=cwd,
        env=surroundings(),
    )
    assert "Traceback" not in done.stderr, done.stderr
    return Answer(done.returncode, done.stdout, done.stderr)


def started(*arguments: str | Path) -> subprocess.Popen[str]:
    """The same, left running, in a process group of its own so that signals reach only it."""
    return subprocess.Popen(
        [sys.executable, "-m", "owlight", *map(str, arguments)],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        env=surroundings(),
        start_new_session=True,
    )


def surroundings() -> dict[str, str]:
    return os.environ | {"PYTHONPATH": str(ROOT / "src"), "PYTHONIOENCODING": "utf-8"}


@dataclass(frozen=True)
class Lab:
    """A folder with files of one's own: names given to commands are paths in it."""

    folder: Path

    def write(self, name: str, text: str) -> Path:
        path = self.folder / f"{name}.toml"
        path.write_text(text, "utf-8")
        return path

    def copy(self, name: str, kind: str, changes: Changes, of: str | None = None) -> Path:
        """A shipped file with texts replaced."""
        return self.write(name, changed(shipped.find(kind, of or name).read_text("utf-8"), changes))

    def sequence(self, changes: Changes | None = None) -> Path:
        return self.write("short", short_sequence(changes))


@pytest.fixture
def lab(tmp_path: Path) -> Lab:
    folder = tmp_path / "lab"
    folder.mkdir()
    return Lab(folder)


@dataclass(frozen=True)
class Finished:
    """One short run, measured once for all tests of this process."""

    folder: Path
    sequence: Path
    answer: Answer


@pytest.fixture(scope="session")
def finished(tmp_path_factory: pytest.TempPathFactory) -> Finished:
    folder = tmp_path_factory.mktemp("a night")
    path = folder / "short.toml"
    path.write_text(short_sequence(), "utf-8")
    answer = command("run", path, "--bench", "bench", "--logbook", folder / "log book", "--json")
    return Finished(folder / "log book", path, answer)


@dataclass
class Told:
    """What a night in this process did: every event, and what was true of the light at its end."""

    events: list[Event] = field(default_factory=list)
    said: list[str] = field(default_factory=list)
    truth: Json = field(default_factory=dict)
    result: Json = field(default_factory=dict)
    measured: Measured | None = None

    def of(self, kind: type) -> list[Any]:
        return [event for event in self.events if isinstance(event, kind)]


Night = Callable[..., Told]


@pytest.fixture
def night(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Night:
    """Measure here; `arrange` sees the bench before the night, `meanwhile` at every event."""

    def measured(
        sequence: Path,
        bench: str | Path = "bench",
        arrange: Callable[[RunningSimulation], None] = lambda running: None,
        meanwhile: Callable[[RunningSimulation, Event], None] = lambda running, event: None,
    ) -> Told:
        told = Told()
        served: list[RunningSimulation] = []
        start = simulation.start

        def arranged(world: Path, stepped: bool = True) -> RunningSimulation:
            running = start(world, stepped)
            arrange(running)
            stop = running.stop

            def looked_at() -> None:
                told.truth.update(running.control.truth())
                stop()

            monkeypatch.setattr(running, "stop", looked_at)
            served.append(running)
            return running

        def show(plan: object, event: Event) -> None:
            told.events.append(event)
            meanwhile(served[0], event)

        monkeypatch.setattr(simulation, "start", arranged)
        resolved = resolve(str(sequence), str(bench))
        order = Order(
            tmp_path / "log", world_path(str(bench), resolved.bench), "a test", say=told.said.append, show=show
        )
        told.measured = measure(resolved, order)
        told.result = summary(order.folder, told.measured.run_id)
        return told

    return measured


@pytest.fixture(name="command")
def command_fixture() -> Callable[..., Answer]:
    return command


@pytest.fixture
def start() -> Iterator[Callable[..., subprocess.Popen[str]]]:
    """Commands left running; whatever still runs at the test's end is killed by its own id."""
    running: list[subprocess.Popen[str]] = []

    def begin(*arguments: str | Path) -> subprocess.Popen[str]:
        running.append(started(*arguments))
        return running[-1]

    yield begin
    for process in running:
        if process.poll() is None:
            process.kill()
        process.communicate()
