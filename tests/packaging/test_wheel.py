"""The wheel is the same program with its data, wherever it is unpacked."""

from __future__ import annotations

import subprocess
import sys
import tomllib
import zipfile
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("wheel")
    command = [sys.executable, "-m", "hatchling", "build", "-t", "wheel", "-d", str(folder)]
    subprocess.run(command, cwd=ROOT, capture_output=True, check=True)
    (built,) = folder.glob("*.whl")
    return built


def test_wheel_reads_its_own_data(wheel: Path, tmp_path: Path) -> None:
    zipfile.ZipFile(wheel).extractall(tmp_path)
    script = Path(__file__).with_name("read_wheel.py")
    found = subprocess.run(
        [sys.executable, "-I", str(script), str(tmp_path)], cwd=tmp_path, capture_output=True, text=True, check=False
    )
    assert found.returncode == 0, found.stderr


def test_every_data_file_is_packed(wheel: Path) -> None:
    packed = set(zipfile.ZipFile(wheel).namelist())
    for kind in ("drivers", "sequences", "simulated_instruments"):
        for path in (ROOT / kind).glob("*.toml"):
            assert f"owlight/shipped/{kind}/{path.name}" in packed


def test_versions_agree(wheel: Path) -> None:
    from owlight import __version__

    project = tomllib.loads((ROOT / "pyproject.toml").read_text("utf-8"))["project"]
    assert project["version"] == __version__ == wheel.name.split("-")[1]


def test_wheel_brings_the_command(wheel: Path) -> None:
    archive = zipfile.ZipFile(wheel)
    (entry,) = (name for name in archive.namelist() if name.endswith("entry_points.txt"))
    assert "owlight = owlight.cli:main" in archive.read(entry).decode()
