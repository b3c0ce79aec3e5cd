"""What every part of the loop works with."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

from owlight.instrument.open_bench import OpenBench
from owlight.link import Stamper
from owlight.run.attended import AttendedClock, StopRequests
from owlight.run.waiting import Waiting
from owlight.vocabulary.captures import Capture
from owlight.vocabulary.events import Emit
from owlight.vocabulary.plan import Plan

Announce = Callable[[int, float], None]
"""Tells a simulated bench the seed and planned time of what comes next; a real bench needs no telling."""


@dataclass
class Night:
    """One run's plan and surroundings; `ranges_v` and `seen` are what the loop has to remember between stays."""

    plan: Plan
    bench: OpenBench
    emit: Emit
    clock: AttendedClock
    stamper: Stamper
    stop: StopRequests
    demodulate_later: Callable[[Capture], Waiting] | None = None
    announce: Announce = lambda seed, planned_time_s: None
    ranges_v: dict[str, tuple[float, ...]] = field(default_factory=dict)
    seen_sha256: set[str] = field(default_factory=set)
