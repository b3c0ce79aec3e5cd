"""A file is found where its reader would look first; caches belong to the user alone."""

from __future__ import annotations

import os
import stat
import subprocess
import sys
from pathlib import Path

import pytest

from owlight import shipped
from owlight.errors import InputError


def lab(tmp_path: Path, *names: str) -> Path:
    for name in names:
        (tmp_path / name).parent.mkdir(parents=True, exist_ok=True)
        (tmp_path / name).write_text("")
    return tmp_path


def test_every_kind_ships_something() -> None:
    assert all(shipped.names(kind) for kind in shipped.KINDS)


@pytest.mark.parametrize("name", ["generic_laser", "generic_laser.toml"])
def test_lab_comes_before_shipped(tmp_path: Path, name: str) -> None:
    folder = lab(tmp_path, "drivers/generic_laser.toml", "simulated_instruments/bench.toml")
    found = shipped.find("drivers", name, near=folder / "simulated_instruments" / "bench.toml")
    assert found == (folder / "drivers" / "generic_laser.toml").resolve()


def test_neighbour_comes_before_lab_folder(tmp_path: Path) -> None:
    folder = lab(tmp_path, "drivers/mine.toml", "mine.toml")
    assert shipped.find("drivers", "mine", near=folder / "bench.toml") == (folder / "mine.toml").resolve()


def test_shipped_comes_last(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    found = shipped.find("drivers", "generic_laser", near=tmp_path / "bench.toml")
    assert found.parent.name == "drivers" and not found.is_relative_to(tmp_path)


def test_path_from_the_current_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(lab(tmp_path, "deep/own.toml"))
    assert shipped.find("sequences", "deep/own.toml") == (tmp_path / "deep" / "own.toml").resolve()


def test_only_the_wanted_kind_is_offered() -> None:
    """Benches lie beside worlds and instruments; each file names its kind in its first key."""
    assert shipped.names("simulated_instruments", "bench") == ("bench",)
    assert shipped.names("simulated_instruments", "world") == ("world",)
    with pytest.raises(InputError, match=r"no bench 'nosuch': neither as a path, nor shipped, which are: bench\. "):
        shipped.find("simulated_instruments", "nosuch", what="bench")


def test_near_name_is_offered() -> None:
    with pytest.raises(InputError, match="Did you mean generic_laser"):
        shipped.find("drivers", "generic_lasr")


NUMBA_CACHE = """
import os
from owlight import shipped
shipped.numba_cache()
place = os.environ["NUMBA_CACHE_DIR"]
print(place, oct(os.stat(place).st_mode & 0o777), sep="\\n")
"""


def kernel_cache(home: Path, **more: str) -> tuple[Path, int]:
    """Where kernels of a fresh process go, and the mode of that folder while it lived."""
    surroundings = {
        name: value for name, value in os.environ.items() if name not in ("NUMBA_CACHE_DIR", "XDG_CACHE_HOME")
    }
    source = str(Path(shipped.__file__).parents[1])
    surroundings |= {"HOME": str(home), "LOCALAPPDATA": str(home), "PYTHONPATH": source, **more}
    command = [sys.executable, "-c", NUMBA_CACHE]
    place, mode = subprocess.run(command, env=surroundings, capture_output=True, text=True, check=True).stdout.split(
        "\n"
    )[:2]
    return Path(place), int(mode, 8)


def test_kernels_lie_in_the_users_cache(tmp_path: Path) -> None:
    place, _ = kernel_cache(tmp_path)
    assert place.is_relative_to(tmp_path) and place.is_dir()


def test_own_choice_of_kernel_cache_stands(tmp_path: Path) -> None:
    place, _ = kernel_cache(tmp_path, NUMBA_CACHE_DIR=str(tmp_path))
    assert place == tmp_path


@pytest.mark.skipif(os.name == "nt", reason="permissions are told otherwise there")
def test_without_a_home_kernels_are_private(tmp_path: Path) -> None:
    (tmp_path / "no folder").touch()
    place, mode = kernel_cache(tmp_path / "no folder")
    assert mode == stat.S_IRWXU, "what lies there is executed: nobody else may write"
    assert not place.exists(), "it goes with its process"
