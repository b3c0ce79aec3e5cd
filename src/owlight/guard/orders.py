"""What the guard is told, as one line of JSON: nothing else is at hand when the runner is dead."""

from __future__ import annotations

import json
from dataclasses import asdict, dataclass

from owlight.vocabulary.plan import SafeStep

BEAT = "beat"
DONE = "done"
READY = "ready"
TAKE_OVER = "take over"


@dataclass(frozen=True)
class Orders:
    """`end_after_s` counts from the start, also on a healthy runner; None is no end."""

    steps: tuple[SafeStep, ...]
    silence_s: float
    runner_pid: int
    log: str
    end_after_s: float | None

    def to_line(self) -> str:
        return json.dumps(asdict(self))

    @staticmethod
    def from_line(line: str) -> Orders:
        raw = json.loads(line)
        steps = tuple(SafeStep(**step) for step in raw.pop("steps"))
        return Orders(steps=steps, **raw)
