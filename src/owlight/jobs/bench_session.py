"""An open bench, real or simulated, with the clock that belongs to it."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

from owlight.bench import Bench
from owlight.clock import Clock, WallClock
from owlight.errors import InputError


@dataclass(frozen=True)
class Surroundings:
    """Where the bench is reached, whose time counts, and how a simulated one is told what comes next."""

    resources: dict[str, str]
    clock: Clock
    real_time: bool
    announce: Callable[[int, float], None]


def _nothing_to_announce(seed: int, planned_time_s: float) -> None:
    """A real bench needs no telling."""


@contextmanager
def surroundings(bench: Bench, world: Path | None) -> Iterator[Surroundings]:
    """Start the simulated bench if there is a world; its process ends with the block."""
    if world is None:
        named = {name: role.resource for name, role in bench.role.items()}
        yield Surroundings(named, WallClock(), True, _nothing_to_announce)
        return
    from owlight import simulation

    running = simulation.start(world, stepped=True)
    try:
        yield Surroundings(
            simulated_resources(bench, running.resources), running.clock, False, running.control.next_capture
        )
    finally:
        running.stop()


def is_simulated(identity: str) -> bool:
    """By the answer to `*IDN?`: a bench file may give plain addresses at which simulated instruments are served."""
    return identity.partition(",")[0].strip() == "Simulated"


def simulated_resources(bench: Bench, served: dict[str, dict[str, str]]) -> dict[str, str]:
    """`simulated hislip` and `simulated socket` replaced by the addresses at which the bench is served now."""
    found: dict[str, str] = {}
    for name, role in bench.role.items():
        word, _, transport = role.resource.partition(" ")
        if name in served and word == "simulated" and transport in served[name]:
            found[name] = served[name][transport]
        else:
            raise InputError(
                f"role.{name}.resource {role.resource!r} is not served by the simulated bench, whose time is not ours. "
                'Write "simulated hislip" or "simulated socket"; or leave out [simulation] where instruments are real.'
            )
    return found
