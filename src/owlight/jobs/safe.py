"""The verb `safe`: attenuation up, sources off, now - with nothing but the bench file and its drivers."""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

from owlight.instrument.safe_state import reach_safe_state
from owlight.jobs.bench_session import is_simulated, surroundings
from owlight.jobs.resolve import resolve, world_path
from owlight.plan import safe_steps
from owlight.vocabulary.events import Event
from owlight.vocabulary.values import Exchange

_FRESH = "A fresh simulation was started and made safe; a bench measured with or served elsewhere is not touched."


def make_safe(bench_name: str) -> dict[str, Any]:
    """Works beside a run and without its lock: a person who asks for darkness gets it."""

    identities = []

    def heard(event: Event) -> None:
        """No run, no logbook; only who answers is of interest."""
        if isinstance(event, Exchange) and event.sent == "*IDN?":
            identities.append(event.received)

    resolved = resolve(None, bench_name)
    world = world_path(bench_name, resolved.bench) if resolved.simulated else None
    with surroundings(resolved.bench, world) as around:
        steps = safe_steps(resolved.bench, resolved.drivers, around.resources)
        safe = reach_safe_state(steps, heard, around.clock)
    return {
        "bench": bench_name,
        "simulated": resolved.simulated or any(map(is_simulated, identities)),
        "words": _FRESH if resolved.simulated else "",
        "confirmed": safe.confirmed,
        "steps": [asdict(step) for step in safe.steps],
    }
