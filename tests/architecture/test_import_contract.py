"""What each room may know is written in pyproject.toml; here it is held, and shown to hold."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
CHECK = "import sys; from importlinter import cli; sys.exit(cli.lint_imports(no_cache=True))"


def verdict(root: Path) -> tuple[int, str]:
    surroundings = {**os.environ, "PYTHONPATH": str(root / "src")}
    command = [sys.executable, "-c", CHECK]
    found = subprocess.run(command, cwd=root, env=surroundings, capture_output=True, text=True, check=False)
    return found.returncode, found.stdout + found.stderr


@pytest.fixture(scope="module")
def copy(tmp_path_factory: pytest.TempPathFactory) -> Path:
    root = tmp_path_factory.mktemp("copy")
    shutil.copytree(ROOT / "src", root / "src", ignore=shutil.ignore_patterns("__pycache__", ".*"))
    for folder in (root / "src").glob("**/"):
        folder.chmod(0o755)  # the checkout may be one that cannot be written
    shutil.copy(ROOT / "pyproject.toml", root)
    return root


def test_every_contract_is_kept() -> None:
    status, words = verdict(ROOT)
    assert status == 0, words


@pytest.mark.parametrize(
    ("path", "text", "broken"),
    [
        ("run/stray.py", "from owlight.logbook import Logbook", "the runner knows no storage BROKEN"),
        ("plan/stray.py", "import pyvisa", "a plan can be made without VISA, SQL or kernels BROKEN"),
        ("simulation/stray.py", "import owlight.scpi", "share no code with what they test BROKEN"),
        ("vocabulary/stray.py", "import owlight.plan", "the flow BROKEN"),
        ("helpers/__init__.py", "", "helpers"),  # a room that nobody gave a place
    ],
)
def test_contract_can_be_broken(copy: Path, path: str, text: str, broken: str) -> None:
    stray = copy / "src" / "owlight" / path
    stray.parent.mkdir(exist_ok=True)
    stray.write_text(text + "\n")
    status, words = verdict(copy)
    stray.unlink()
    assert status != 0 and broken in words
