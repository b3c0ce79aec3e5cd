"""The verb `report`."""

from __future__ import annotations

from pathlib import Path

from owlight.logbook.read import open_reader, runs
from owlight.report import write_curve, write_report


def report(folder: Path, run_text: str = "last") -> Path:
    """Write the page beside the logbook and return its path."""
    with open_reader(folder) as reader:
        return write_report(reader, runs.find_run(reader, run_text), folder)


def curve_picture(folder: Path, run_text: str, picture: Path) -> Path:
    """Write the curve alone, as an SVG file."""
    with open_reader(folder) as reader:
        return write_curve(reader, runs.find_run(reader, run_text), picture)
