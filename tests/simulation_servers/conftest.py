"""The simulated bench as any other program meets it: a process that prints one line of JSON."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

_ROOT = Path(__file__).parents[2]
WORLD = _ROOT / "simulated_instruments" / "world.toml"


@pytest.fixture(scope="session")
def served() -> Iterator[dict[str, dict[str, str]]]:
    """Role -> transport -> resource, in wall time."""
    surroundings = os.environ | {"PYTHONPATH": str(_ROOT / "src")}
    process = subprocess.Popen(
        [sys.executable, "-m", "owlight.simulation", str(WORLD), "--wall"],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        env=surroundings,
    )
    assert process.stdin is not None and process.stdout is not None
    yield json.loads(process.stdout.readline())["roles"]
    process.terminate()
    process.communicate(timeout=10)


@pytest.fixture(scope="session")
def world_path() -> Path:
    return WORLD
