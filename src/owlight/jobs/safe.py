"""The verb `safe`: attenuation up, sources off, now - with nothing but the bench file and its drivers."""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

from owlight.instrument.safe_state import reach_safe_state
from owlight.jobs.bench_session import surroundings
from owlight.jobs.resolve import resolve, world_path
from owlight.plan import safe_steps
from owlight.vocabulary.events import Event


def make_safe(bench_name: str) -> dict[str, Any]:
    """Works beside a run and without its lock: a person who asks for darkness gets it."""

    def unheard(event: Event) -> None:
        """No run, no logbook."""

    resolved = resolve(None, bench_name)
    world = world_path(bench_name, resolved.bench) if resolved.simulated else None
    with surroundings(resolved.bench, world) as around:
        steps = safe_steps(resolved.bench, resolved.drivers, around.resources)
        safe = reach_safe_state(steps, unheard, around.clock)
    return {"bench": bench_name, "confirmed": safe.confirmed, "steps": [asdict(step) for step in safe.steps]}
