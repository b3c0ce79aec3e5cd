"""What README.md and DEVELOPERS.md say about the tree, the contract and the exit statuses is so."""

from __future__ import annotations

import ast
import os
import re
import subprocess
import sys
import tomllib
import xml.etree.ElementTree as ElementTree
from pathlib import Path

import pytest

from owlight import errors

ROOT = Path(__file__).parents[2]
SOURCE = ROOT / "src" / "owlight"
TEXTS = {name: (ROOT / name).read_text("utf-8") for name in ("README.md", "DEVELOPERS.md")}
DEVELOPERS = TEXTS["DEVELOPERS.md"]
# words of the drawing that are no rooms
REMARKS = re.compile(
    "toml|drivers|instruments|nothing|is|open|yet|next_attempt|power|own|process|stay|emit|scpi|over|sockets|safe|state"
    "|checks|curve|sensitivity|show|reproduce"
)


def rooms() -> set[str]:
    named = {path.stem for path in SOURCE.iterdir() if path.suffix == ".py" or (path / "__init__.py").exists()}
    return {name for name in named if not name.startswith("_")}


def blocks(text: str, language: str) -> list[str]:
    return [body for kind, body in re.findall(r"(?ms)^```(\w*)\n(.*?)^```$", text) if kind == language]


def inline(text: str) -> list[str]:
    return re.findall(r"`([^`\n]+)`", re.sub(r"(?ms)^```.*?^```$", "", text))


@pytest.mark.parametrize("name", TEXTS)
def test_every_block_is_of_a_tested_kind(name: str) -> None:
    kinds = set(re.findall(r"(?m)^```(\w+)$", TEXTS[name]))
    assert kinds <= {"console"}
    drawings = len(blocks(TEXTS[name], ""))
    assert drawings == (1 if name == "DEVELOPERS.md" else 0)


def test_drawing_names_rooms_that_exist() -> None:
    (drawing,) = blocks(DEVELOPERS, "")
    words = set(re.findall(r"[a-z_]{2,}", drawing.lower()))
    strangers = {word for word in words if not REMARKS.fullmatch(word)} - rooms()
    assert not strangers
    assert words & rooms() >= {"reader", "plan", "run", "link", "instrument", "capture", "demodulation", "logbook"}


def test_table_of_rooms_is_the_contract() -> None:
    cells = re.findall(r"(?m)^\| (\d+) \| ([^|]+) \|", DEVELOPERS)
    table = [set(re.findall(r"`(\w+)`", names)) for _, names in sorted(cells, key=lambda cell: -int(cell[0]))]
    contracts = tomllib.loads((ROOT / "pyproject.toml").read_text("utf-8"))["tool"]["importlinter"]["contracts"]
    (flow,) = (contract["layers"] for contract in contracts if contract["type"] == "layers")
    assert table == [set(layer.split(" | ")) for layer in flow]
    assert set().union(*table) == rooms()


@pytest.mark.parametrize("name", TEXTS)
def test_named_places_exist(name: str) -> None:
    links = re.findall(r"\]\(([^)#:]+)\)", TEXTS[name])
    places = [word for word in inline(TEXTS[name]) if re.fullmatch(r"[\w.]+(/[\w.]+)*/?", word) and "/" in word]
    assert links or places
    for place in [*links, *places]:
        found = (ROOT / place, SOURCE / place)
        assert any(path.exists() for path in found) or place.startswith(".venv"), place


@pytest.mark.parametrize(
    ("status", "words"),
    [
        (errors.InputError.exit_status, "the input is wrong"),
        (errors.BenchError.exit_status, "the bench or an instrument failed"),
        (errors.SafetyRefusal.exit_status, "refused for safety"),
        (errors.StorageError.exit_status, "storage"),
    ],
)
def test_exit_statuses_are_those_of_the_errors(status: int, words: str) -> None:
    listed = " ".join(TEXTS["README.md"].split())
    assert f"; {status} {words}" in listed


def test_figure_is_marked_simulated() -> None:
    (picture,) = re.findall(r"!\[.*\]\((.+)\)", TEXTS["README.md"])
    words = " ".join(ElementTree.parse(ROOT / picture).getroot().itertext())
    assert "simulated" in words and "prefers-color-scheme: dark" in words


def shown() -> list[str]:
    """The commands of DEVELOPERS.md, in blocks and in the text."""
    lines = [line for block in blocks(DEVELOPERS, "console") for line in block.splitlines()]
    return lines + [word for word in inline(DEVELOPERS) if word.startswith(("python3 ", "bash ", ".venv/bin/python "))]


def test_commands_of_developers_are_known() -> None:
    assert {"python3 tests", "bash .ci/run"} <= set(shown())
    known = ("python3 tests", "bash .ci/run", ".venv/bin/python benchmarks/")
    assert [line for line in shown() if not line.startswith(known)] == []


@pytest.mark.parametrize("line", [line for line in shown() if line.startswith("python3 tests ")])
def test_part_of_the_suite_is_found(line: str) -> None:
    """The tests that the command chooses are collected: there are some, and all can be imported."""
    chosen = line.split()[2:]
    # collecting all would take as long as all the other tests here; each of these folders holds long studies
    where = [] if any(word.startswith("tests/") for word in chosen) else ["tests/coverage", "tests/statistics"]
    command = [sys.executable, "-m", "pytest", "--collect-only", "-q", "-p", "no:cacheprovider", *chosen, *where]
    surroundings = {**os.environ, "PYTHONPATH": str(ROOT / "src")}
    found = subprocess.run(command, cwd=ROOT, env=surroundings, capture_output=True, encoding="utf-8")
    assert found.returncode == 0, found.stdout  # 5 would say that nothing was chosen


@pytest.mark.skipif(os.name == "nt", reason="a shell of the other systems")
def test_check_script_can_be_read() -> None:
    subprocess.run(["bash", "-n", ".ci/run"], cwd=ROOT, check=True)
    last = [line for line in (ROOT / ".ci" / "run").read_text("utf-8").splitlines() if line][-1]
    assert last == "python3 tests", "the tests come last: their closing line is the script's"


@pytest.mark.parametrize("path", sorted((ROOT / "benchmarks").glob("*.py")), ids=lambda path: path.stem)
def test_benchmark_is_named_and_loads(path: Path) -> None:
    assert f"benchmarks/{path.name}`" in DEVELOPERS
    assert (ast.get_docstring(ast.parse(path.read_text("utf-8"))) or "").count(f"python benchmarks/{path.name}")
    load = f"import runpy; runpy.run_path({str(path)!r}, run_name='loaded')"
    surroundings = {**os.environ, "PYTHONPATH": str(ROOT / "src")}
    subprocess.run([sys.executable, "-c", load], cwd=ROOT, env=surroundings, check=True)
