"""What can be known without touching an instrument."""

from __future__ import annotations

import json
from dataclasses import asdict

from owlight.cli.options import BenchFile, Json, Seed, SequenceFile


def forecast(sequence: SequenceFile, bench: BenchFile, seed: Seed = None, as_json: Json = False) -> None:
    """Mistakes in the files, points, order, time, disk, power at each plane, and the way to the safe state."""
    from owlight.cli.forecast_page import print_forecast
    from owlight.jobs.planning import plan_of
    from owlight.jobs.resolve import resolve
    from owlight.plan import forecast as forecast_of

    found = forecast_of(plan_of(resolve(sequence, bench), seed=seed))
    if as_json:
        print(json.dumps(asdict(found)))
    else:
        print_forecast(found)
