"""The tree keeps its promises: data folders hold data, names say what is inside, nothing tells where it was made."""

from __future__ import annotations

import re
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
TEXT = {".py", ".toml", ".md", ".lock", ".sql", ".css", ".html", ".js", ".svg", ".json", ".txt", ""}
EMPTY_WORDS = {"util", "utils", "helper", "helpers", "common", "manager", "handler", "misc"}
# put together here, or this file would find itself
ELSEWHERE = re.compile(
    "|".join(
        [
            r"(?<![\w.}])/(?:wo" + "rk|ro" + "ot|o" + r"pt)/\w",
            "pythonhos" + "ted",
            "py" + r"pi\.org",
            "artifac" + "tory",
        ]
    )
)


def files() -> list[Path]:
    """What belongs to the project: all that git tracks; without git, all that does not begin with a dot."""
    found = subprocess.run(["git", "ls-files", "-z"], cwd=ROOT, capture_output=True, check=False)
    if found.returncode == 0 and found.stdout:
        return [path for name in found.stdout.decode().split("\0") if name and (path := ROOT / name).is_file()]
    folders = ("src", "tests", "benchmarks", "drivers", "sequences", "simulated_instruments", "docs", ".ci")
    inside = [path for folder in folders for path in (ROOT / folder).rglob("*") if "__pycache__" not in path.parts]
    return [path for path in [*inside, *ROOT.glob("*.*")] if path.is_file()]


def test_no_place_of_origin() -> None:
    found = [
        f"{path.relative_to(ROOT)}:{number}: {line.strip()[:80]}"
        for path in files()
        if path.suffix in TEXT
        for number, line in enumerate(path.read_text("utf-8").splitlines(), 1)
        if ELSEWHERE.search(line)
    ]
    assert not found, "\n".join(found)


@pytest.mark.parametrize("folder", ["drivers", "sequences", "simulated_instruments"])
def test_data_folders_hold_data(folder: str) -> None:
    inside = [path for path in files() if path.is_relative_to(ROOT / folder)]
    assert inside and {path.suffix for path in inside} == {".toml"}, "a driver file cannot run code"


def test_tests_shadow_no_standard_module() -> None:
    packages = [path for path in files() if path.is_relative_to(ROOT / "tests") and path.name == "__init__.py"]
    assert not packages, "tests/statistics as a package would stand before the standard library's"


def test_names_say_what_is_inside() -> None:
    named = [
        path
        for path in files()
        if path.is_relative_to(ROOT / "src") and EMPTY_WORDS & {path.stem, *path.relative_to(ROOT).parts}
    ]
    assert not named


def test_long_files_give_a_reason() -> None:
    silent = []
    for path in files():
        if path.suffix == ".py" and path.is_relative_to(ROOT / "src"):
            text = path.read_text("utf-8")
            if text.count("\n") > 500 and "# long:" not in text:
                silent.append(str(path.relative_to(ROOT)))
    assert not silent
