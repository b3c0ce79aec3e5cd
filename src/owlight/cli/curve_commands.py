"""What the logbook holds: logbook, show, report."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Annotated

import typer

from owlight.cli.options import LOGBOOK, Folder, Json, Run


def logbook(logbook: Folder = LOGBOOK, as_json: Json = False) -> None:
    """List the runs of a logbook, newest first."""
    from owlight.cli.result import print_runs
    from owlight.jobs.listing import listing

    found = listing(logbook)
    if as_json:
        print(json.dumps({"logbook": str(logbook), "runs": found}))
    else:
        print_runs(found, logbook)


def show(run: Run = "last", logbook: Folder = LOGBOOK, as_json: Json = False) -> None:
    """Show one run: its curve, its sensitivity, its findings."""
    from owlight.cli.result import print_result
    from owlight.jobs.summary import summary

    found = summary(logbook, run)
    if as_json:
        print(json.dumps(found))
    else:
        print_result(found, None)


def report(
    run: Run = "last",
    logbook: Folder = LOGBOOK,
    curve: Annotated[
        Path | None, typer.Option("--curve", metavar="FILE", help="Write the curve alone, as SVG.")
    ] = None,
    as_json: Json = False,
) -> None:
    """Write the run's report, one HTML page that stands alone."""
    from owlight.jobs.report import curve_picture
    from owlight.jobs.report import report as write

    written = write(logbook, run) if curve is None else curve_picture(logbook, run, curve)
    typer.echo(json.dumps({"report" if curve is None else "curve": str(written)}) if as_json else f"{written}")
