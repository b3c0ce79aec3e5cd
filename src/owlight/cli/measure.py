"""Commands that measure: demo, run, reproduce."""

from __future__ import annotations

import json
import shlex
import sys
from pathlib import Path
from typing import Any

import typer

from owlight.cli.options import LOGBOOK, BenchFile, Folder, Json, Run, Seed, SequenceFile
from owlight.errors import BusyError, SafetyRefusal

DEMO_SEQUENCE = "qpsk_sensitivity"
DEMO_BENCH = "bench"
_MOST_DEMOS = 9


def demo(logbook: Folder = Path("owlight-demo"), seed: Seed = None, as_json: Json = False) -> None:
    """Run the main job on the simulated bench: a DP-QPSK sensitivity, with a report to open."""
    for number in range(2, _MOST_DEMOS):
        try:
            _measure(DEMO_SEQUENCE, DEMO_BENCH, logbook, seed, as_json)
        except BusyError:
            # two demos at once are no mistake: each simulates a bench of its own
            elsewhere = logbook.with_name(f"{logbook.name.removesuffix(f'-{number - 1}')}-{number}")
            print(f"Another run writes to {logbook}; this one goes to {elsewhere}.", file=sys.stderr)
            logbook = elsewhere
    _measure(DEMO_SEQUENCE, DEMO_BENCH, logbook, seed, as_json)


def run(
    sequence: SequenceFile, bench: BenchFile, logbook: Folder = LOGBOOK, seed: Seed = None, as_json: Json = False
) -> None:
    """Measure a sequence on a bench."""
    _measure(sequence, bench, logbook, seed, as_json)


def _measure(sequence: str, bench: str, folder: Path, seed: int | None, as_json: bool) -> None:
    from owlight.cli.progress import Progress
    from owlight.cli.result import print_result
    from owlight.jobs.night import Order, measure
    from owlight.jobs.report import report
    from owlight.jobs.resolve import resolve, world_path
    from owlight.jobs.summary import summary

    resolved = resolve(sequence, bench)
    world = world_path(bench, resolved.bench) if resolved.simulated else None
    progress = Progress(sys.stderr)
    order = Order(folder, world, shlex.join(sys.argv), seed=seed, say=progress.say, show=progress.show)
    measured = measure(resolved, order)
    progress.close()
    page = report(folder, measured.run_id)
    found = summary(folder, measured.run_id) | {"report": str(page)}
    if as_json:
        print(json.dumps(found))
    else:
        print_result(found, bench)
    raise typer.Exit(SafetyRefusal.exit_status if measured.outcome.refused else exit_status(found))


def exit_status(found: dict[str, Any]) -> int:
    """0 measured and believable; 1 a finding is bad or points are missing; 3 gave up, or the bench is not confirmed
    safe; 130 a person stopped it."""
    safe = found.get("safe_state")
    if safe is not None and not safe["confirmed"]:
        return 3
    if found["state"] == "called off":
        return 130
    if found["state"] != "finished":
        return 3
    bad = any(check["finding"] == "bad" for check in found["findings"])
    return 1 if bad or found.get("missing") else 0


def reproduce(
    run: Run,
    bench: str | None = typer.Option(None, "--bench", metavar="B", help="Another bench than the stored one."),
    logbook: Folder = LOGBOOK,
    as_json: Json = False,
) -> None:
    """Measure again from the stored sequence and compare."""
    from owlight.cli.progress import Progress
    from owlight.cli.result import print_reproduction
    from owlight.jobs.night import Order
    from owlight.jobs.reproduce import reproduce as measure_again

    progress = Progress(sys.stderr)
    order = Order(logbook, None, shlex.join(sys.argv), say=progress.say, show=progress.show)
    found = measure_again(run, bench, order)
    progress.close()
    if as_json:
        print(json.dumps(found))
    else:
        print_reproduction(found)
    raise typer.Exit(exit_status(found))
