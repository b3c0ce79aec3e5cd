"""Waiting until an instrument shows that a change is over; bench time, bounded."""

from __future__ import annotations

from collections.abc import Callable

from owlight.clock import Clock
from owlight.driver import Settled
from owlight.errors import InstrumentError
from owlight.scpi.status import has_bit

Ask = Callable[[str], str]


def wait_settled(role: str, settled: Settled, ask: Ask, clock: Clock, alike: Callable[[str, str], bool]) -> None:
    """`alike` says whether two answers to `settled.query` lie within the tolerance of each other ("stable" only)."""
    if settled.by == "wait":
        clock.sleep(settled.wait_s)
    elif settled.by == "condition":
        _poll(role, settled, clock, lambda: not has_bit(ask(settled.query), settled.bit))
    elif settled.by == "stable":
        seen = [ask(settled.query)]

        def stands_still() -> bool:
            seen.append(ask(settled.query))
            return alike(seen[-2], seen[-1])

        clock.sleep(settled.every_s)
        _poll(role, settled, clock, stands_still)


def _poll(role: str, settled: Settled, clock: Clock, over: Callable[[], bool]) -> None:
    """Bounded by bench time and by a count, so that a clock that stands still cannot make it endless."""
    most = 2 + round(settled.at_most_s / settled.every_s)
    end_s = clock.monotonic_s() + settled.at_most_s
    for _ in range(most):
        if over():
            return
        if clock.monotonic_s() >= end_s:
            break
        clock.sleep(settled.every_s)
    raise InstrumentError(
        f"{role} did not settle within {settled.at_most_s:g} s ({settled.query}). "
        "Nothing is measured on it; look at the instrument, or allow more time in its driver file.",
        role,
    )
