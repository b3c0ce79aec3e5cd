"""From two file names to everything that decides what happens, or every mistake of every file at once."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from pathlib import Path

from owlight import shipped
from owlight.bench import Bench, read_bench
from owlight.driver import Driver, read_driver
from owlight.errors import InputError, Problem
from owlight.sequence import Sequence, read_sequence
from owlight.vocabulary.plan import Source


@dataclass(frozen=True)
class Resolved:
    """All files read and found right; `sources` are their texts, whole."""

    sequence: Sequence | None
    bench: Bench
    drivers: dict[str, Driver]
    sources: tuple[Source, ...]
    simulated: bool

    def source(self, kind: str, name: str | None = None) -> Source:
        return next(s for s in self.sources if s.kind == kind and (name is None or s.name == name))


def source_of(kind: str, name: str, text: str) -> Source:
    return Source(kind, name, text, hashlib.sha256(text.encode()).hexdigest())


class _Reading:
    """Collects sources and problems while files lead to further files; `named_by` are arguments that name the first."""

    def __init__(self, named_by: dict[str, str]) -> None:
        self.named_by = named_by
        self.sources: dict[tuple[str, str], Source] = {}
        self.problems: list[Problem] = []

    def text(self, kind: str, folder: str, name: str, near: Path | None) -> tuple[str, Path] | None:
        try:
            path = shipped.find(folder, name, near, kind)
            text = path.read_text("utf-8")
        except InputError as trouble:
            self.problems += trouble.problems or (Problem(self.named_by.get(kind, name), None, "", trouble.words),)
            return None
        except (OSError, UnicodeDecodeError) as trouble:
            self.problems.append(Problem(name, None, "", f"cannot be read as UTF-8 text ({trouble})"))
            return None
        self.sources[kind, path.stem] = source_of(kind, path.stem, text)
        return text, path


def resolve(
    sequence_name: str | None, bench_name: str, cwd: Path | None = None, bench_argument: str = "--bench"
) -> Resolved:
    """Read sequence, bench, drivers and a simulated bench's world and instruments; InputError names every mistake."""
    reading = _Reading({"sequence": "SEQUENCE", "bench": bench_argument})
    near = (cwd or Path.cwd()) / "here"
    sequence = None
    if sequence_name is not None and (found := reading.text("sequence", "sequences", sequence_name, near)):
        document = read_sequence(found[0], str(found[1]))
        reading.problems += document.problems
        sequence = document.value
    bench, drivers = None, {}
    if found := reading.text("bench", "simulated_instruments", bench_name, near):
        bench_document = read_bench(found[0], str(found[1]))
        reading.problems += bench_document.problems
        bench = bench_document.value
        if bench is not None:
            drivers = _drivers(reading, bench, found[1])
            if bench.simulation is not None:
                _world(reading, bench.simulation.world, found[1])
    if reading.problems or bench is None:
        raise InputError("Nothing was opened, because the files have mistakes:", tuple(reading.problems))
    return Resolved(sequence, bench, drivers, tuple(reading.sources.values()), bench.simulation is not None)


def _drivers(reading: _Reading, bench: Bench, bench_path: Path) -> dict[str, Driver]:
    drivers: dict[str, Driver] = {}
    for name, role in bench.role.items():
        if found := reading.text("driver", "drivers", role.driver, bench_path):
            document = read_driver(found[0], str(found[1]))
            reading.problems += document.problems
            if document.value is not None:
                drivers[name] = document.value
                if not document.value.fits(name):
                    words = f"driver {role.driver} is for the role {document.value.role}"
                    reading.problems.append(Problem(str(bench_path), None, f"role.{name}.driver", words))
    return drivers


def _world(reading: _Reading, world_name: str, bench_path: Path) -> None:
    """The world and its instrument files are read by the simulation; here they are only stored with the run."""
    from owlight.simulation.world import read_world

    if found := reading.text("world", "simulated_instruments", world_name, bench_path):
        document = read_world(found[0], str(found[1]))
        reading.problems += document.problems
        if document.value is not None:
            for name in dict.fromkeys(document.value.instruments.values()):
                reading.text("instrument", "simulated_instruments", name, found[1])


def world_path(bench_name: str, bench: Bench) -> Path:
    """Where the world file of a simulated bench lies."""
    if bench.simulation is None:
        raise InputError(f"{bench_name} is not a simulated bench: it names no world. Give a bench with [simulation].")
    near = Path.cwd() / "here"
    return shipped.find(
        "simulated_instruments", bench.simulation.world, shipped.find("simulated_instruments", bench_name, near)
    )
