"""The curve alone, as an SVG file that carries its own style: for a text, a slide, a web page."""

from __future__ import annotations

from importlib import resources
from pathlib import Path

from owlight.errors import InputError, StorageError
from owlight.logbook.read import Reader
from owlight.report.curve_figure import WIDE, curve_figure
from owlight.report.facts import gather
from owlight.report.markup import Markup, element

_MARGIN = 26
_BACKGROUND = ".sheet { fill: var(--paper); } svg .mark { font-weight: 600; fill: var(--ink); }"


def write_curve(reader: Reader, run_id: str, path: Path) -> Path:
    """InputError when the run has no point to draw, StorageError when the file cannot be written."""
    facts = gather(reader, run_id)
    figure = curve_figure(facts, WIDE)
    if figure is None:
        raise InputError(f"Run {run_id[:8]} has no point with counted bits, so there is no curve to draw.")
    words = f"{facts.plan.name}, run {run_id[:8]}"
    if facts.header.simulated:
        words += " - simulated, not a measurement of hardware"
    style = resources.files("owlight.report").joinpath("page.css").read_text("utf-8") + _BACKGROUND
    height = WIDE.height + _MARGIN
    whole = element(
        "svg",
        element("style", Markup(style)),
        element("rect", width=WIDE.width, height=height, class_="sheet"),
        element("text", words, x=WIDE.left, y=18, class_="mark"),
        element("g", figure, transform=f"translate(0 {_MARGIN})"),
        xmlns="http://www.w3.org/2000/svg",
        viewBox=f"0 0 {WIDE.width} {height}",
        width=WIDE.width,
        height=height,
    )
    # inside a picture the figure needs its size, which a page would give it
    sized = whole.replace('role="img"', f'role="img" width="{WIDE.width}" height="{WIDE.height}"', 1)
    try:
        path.write_text(sized + "\n", "utf-8")
    except OSError as trouble:
        raise StorageError(
            f"The curve could not be written to {path} ({trouble.strerror}); the logbook itself is untouched. "
            "Name a file that can be written."
        ) from trouble
    return path
