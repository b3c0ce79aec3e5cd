"""Waiting until an instrument shows that a change is over; bench time, bounded."""

from __future__ import annotations

from collections.abc import Callable

from owlight.clock import Clock
from owlight.driver import Settled
from owlight.errors import InstrumentError
from owlight.scpi.status import has_bit

Ask = Callable[[str], str]


def wait_settled(role: str, settled: Settled, ask: Ask, clock: Clock) -> None:
    """By a condition or by waiting; `*OPC?` has been answered before."""
    if settled.by == "wait":
        clock.sleep(settled.wait_s)
        return

    def bit_is_off() -> bool:
        answered = ask(settled.query)
        try:
            return not has_bit(answered, settled.bit)
        except ValueError as error:
            raise InstrumentError(
                f"{role} answers {settled.query} with no register: {error}. Its driver file does not fit it.", role
            ) from None

    if settled.by == "condition" and not _poll(settled, clock, bit_is_off):
        raise InstrumentError(
            f"{role} did not settle within {settled.at_most_s:g} s ({settled.query}). "
            "Nothing is measured on it; look at the instrument, or allow more time in its driver file.",
            role,
        )


def wait_arrived(settled: Settled, there: Callable[[], bool], clock: Clock) -> None:
    """Until two read-backs in a row are where they should be. It never fails: what was reached is compared next."""
    in_a_row = [False]

    def stands_there() -> bool:
        in_a_row.append(there())
        return in_a_row[-1] and in_a_row[-2]

    _poll(settled, clock, stands_there)


def _poll(settled: Settled, clock: Clock, over: Callable[[], bool]) -> bool:
    """Bounded by bench time and by a count, so that a clock that stands still cannot make it endless."""
    most = 2 + round(settled.at_most_s / settled.every_s)
    end_s = clock.monotonic_s() + settled.at_most_s
    for _ in range(most):
        if over():
            return True
        if clock.monotonic_s() >= end_s:
            break
        clock.sleep(settled.every_s)
    return False
