"""python -I read_wheel.py FOLDER: the wheel installed in FOLDER imports, starts, and reads the data it carries."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path


def data_of(place: Path) -> dict[str, int]:
    """How many files of each kind the wheel carries; each was found and read."""
    from owlight import shipped

    assert Path(shipped.__file__).is_relative_to(place), f"read {shipped.__file__} instead of the wheel"
    for kind in shipped.KINDS:
        assert shipped.names(kind), f"the wheel carries no {kind}"
        for name in shipped.names(kind):
            path = shipped.find(kind, name)
            assert path.is_relative_to(place), f"{path} does not come from the wheel"
            assert path.read_text("utf-8"), f"{path} is empty"
    return {kind: len(shipped.names(kind)) for kind in shipped.KINDS}


def strangers_in(place: Path) -> list[Path]:
    """What a wheel of ours must not carry: anything but data beside the program, and tests."""
    packed = [path for path in (place / "owlight" / "shipped").rglob("*") if path.is_file() and path.suffix != ".toml"]
    return packed + list(place.glob("owlight/**/test_*.py"))


def forecast_from(place: Path) -> None:
    """The installed program plans the shipped sequence on the shipped bench."""
    start = f"import sys; sys.path.insert(0, {str(place)!r}); from owlight.cli import main; main()"
    command = [sys.executable, "-I", "-c", start, "forecast", "qpsk_sensitivity", "--bench", "bench", "--json"]
    found = subprocess.run(command, capture_output=True, text=True, check=False)
    assert found.returncode == 0, found.stderr


if __name__ == "__main__":
    folder = Path(sys.argv[1]).resolve()
    sys.path.insert(0, str(folder))
    counted = data_of(folder)
    assert not strangers_in(folder), strangers_in(folder)
    forecast_from(folder)
    print("wheel read:", counted)
