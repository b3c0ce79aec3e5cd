"""What each stage reports, gathered as the journey goes; and how a journey ends early."""

from __future__ import annotations

import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field

from owlight.demodulation.chain import STAGES
from owlight.vocabulary.captures import StageReport


class NoLockError(Exception):
    """The journey ends here; the words say why."""


@dataclass
class Journal:
    """Times and figures by stage; of a stage that is visited twice they are brought together."""

    seconds: dict[str, float] = field(default_factory=dict)
    figures: dict[str, dict[str, float]] = field(default_factory=dict)

    @contextmanager
    def stage(self, name: str) -> Iterator[dict[str, float]]:
        began = time.perf_counter()
        try:
            yield self.figures.setdefault(name, {})
        finally:
            self.seconds[name] = self.seconds.get(name, 0.0) + time.perf_counter() - began

    def take_over(self, other: Journal) -> None:
        for name, figures in other.figures.items():
            self.figures[name] = self.figures.get(name, {}) | figures
            self.seconds[name] = self.seconds.get(name, 0.0) + other.seconds[name]

    def reports(self) -> tuple[StageReport, ...]:
        return tuple(
            StageReport(name, self.seconds[name], self.figures[name]) for name in STAGES if name in self.figures
        )
