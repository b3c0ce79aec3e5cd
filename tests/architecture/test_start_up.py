"""A command loads what it needs and no more: a question on the command line is answered at once."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

SLOW = {
    "asyncio", "matplotlib", "multiprocessing", "numba", "numpy", "pyvisa", "pyvisa_py", "rich", "scipy",
    "sqlite3", "sqlite_utils",
}  # fmt: skip  # pydantic is not among them: typer itself loads it when it reads the arguments of a command
RUN = """
import json, sys
from owlight.cli import main
try:
    main()
except SystemExit as stop:
    assert not stop.code, stop.code
print(json.dumps(sorted(sys.modules)))
"""


def loaded(tmp_path: Path, *words: str) -> set[str]:
    """The modules in memory after a command."""
    surroundings = {**os.environ, "PYTHONPATH": str(Path(__file__).parents[2] / "src")}
    command = [sys.executable, "-c", RUN, *words]
    found = subprocess.run(command, cwd=tmp_path, env=surroundings, capture_output=True, text=True, check=False)
    assert found.returncode == 0, found.stderr
    return set(json.loads(found.stdout.splitlines()[-1]))


@pytest.mark.parametrize("words", [("--help",), ("--version",), ("forecast", "--help"), ("demo", "--help")])
def test_help_loads_nothing_slow(tmp_path: Path, words: tuple[str, ...]) -> None:
    found = loaded(tmp_path, *words) & SLOW
    assert not found


def test_forecast_opens_no_way_to_instruments(tmp_path: Path) -> None:
    modules = loaded(tmp_path, "forecast", "qpsk_sensitivity", "--bench", "bench")
    assert "owlight.plan" in modules
    forbidden = {"pyvisa", "pyvisa_py", "sqlite3", "sqlite_utils", "numba", "scipy.signal", "matplotlib"}
    found = modules & forbidden
    assert not found
    rooms = ("owlight.link", "owlight.instrument", "owlight.logbook", "owlight.demodulation.kernels")
    assert not {name for name in modules if name.startswith(rooms)}
