"""The way to the safe state, with nothing but steps: used by the run, by a person's `safe` and by the guard.

Every step has its own link and its own two seconds, and no step waits for another's success.
"""

from __future__ import annotations

import contextlib
from collections.abc import Callable

from owlight.clock import Clock, WallClock
from owlight.errors import BenchError
from owlight.link import Link, Opener, Stamper, open_visa
from owlight.scpi import IdentityText, matches, may_be, parse_boolean, parse_number
from owlight.scpi.status import has_bit
from owlight.vocabulary.events import Emit, SafeState, SafeStepOutcome
from owlight.vocabulary.plan import SafeStep

STEP_S = 2.0
_QUERY_S = 0.5
_EVERY_S = 0.05
_REAL = WallClock()


def reach_safe_state(
    steps: tuple[SafeStep, ...],
    emit: Emit,
    clock: Clock,
    opener: Opener = open_visa,
    stamper: Stamper | None = None,
) -> SafeState:
    """Never raises for an instrument, a link or a full disk: what is not confirmed is said to be unconfirmed."""
    stamper = stamper or Stamper(clock)

    def quietly(event: object) -> None:
        # darkness comes before the record of it
        with contextlib.suppress(Exception):
            emit(event)  # type: ignore[arg-type]

    links = [(step, Link(step.role, step.resource, quietly, clock, opener, stamper=stamper)) for step in steps]
    outcomes, silent = [], []
    for step, link in links:
        if step.role == "attenuator" and not _answers(link):
            silent.append((step, link))  # it may stand open: the sources do not wait for it
        else:
            outcomes.append(_over(step, link, clock, STEP_S))
    outcomes += [_over(step, link, clock, STEP_S - _QUERY_S) for step, link in silent]
    return SafeState(stamper.stamp(), all(outcome.confirmed for outcome in outcomes), tuple(outcomes))


def _answers(link: Link) -> bool:
    with contextlib.suppress(Exception):
        link.open(_QUERY_S)
    return link.healthy


def _over(step: SafeStep, link: Link, clock: Clock, within_s: float) -> SafeStepOutcome:
    outcome = take_step(step, link, clock, within_s)
    link.close()
    return outcome


def take_step(step: SafeStep, link: Link, clock: Clock, within_s: float = STEP_S) -> SafeStepOutcome:
    """One step over one link, opened if it is not; read back until it is as expected or the time is over."""
    end_s = _REAL.monotonic_s() + within_s

    def left_s() -> float:
        return max(0.01, min(_QUERY_S, end_s - _REAL.monotonic_s()))

    answered = ""
    try:
        _open(step, link, end_s, left_s)
        link.write(step.command, left_s())
        while True:
            answered = link.query(step.query, left_s())
            there = as_expected(step, answered)
            if there and _settled(step, link, left_s):
                return SafeStepOutcome(step.role, step.words, answered, True)
            if _REAL.monotonic_s() >= end_s:
                why = "it answers so, but has not settled yet" if there else "it answers otherwise"
                return SafeStepOutcome(step.role, f"{step.words}: {why}", answered, False)
            clock.sleep(_EVERY_S)  # bench time passes here, or a simulated attenuator would never arrive
            _REAL.sleep(0.001)
    except Exception as trouble:  # whatever it is, the next step must have its turn
        return SafeStepOutcome(step.role, f"{step.words}: {trouble}", answered, False)


def _open(step: SafeStep, link: Link, end_s: float, left_s: Callable[[], float]) -> None:
    """An instrument that takes one connection may need a moment to notice that the last one ended."""
    while not link.healthy:
        try:
            link.open(left_s())
        except BenchError:
            if _REAL.monotonic_s() + _QUERY_S >= end_s:
                raise
            _REAL.sleep(_EVERY_S)
    if not step.serial_number or not link.identity_text:
        return
    found = IdentityText.from_text(link.identity_text).serial_number
    if not may_be(found, step.serial_number):
        raise ValueError(f"serial number {found} answers instead of {step.serial_number}, so nothing was sent")


def _settled(step: SafeStep, link: Link, left_s: Callable[[], float]) -> bool:
    """A read-back may be where it was sent and not where it is: its register says whether it still moves."""
    return not step.settled_query or not has_bit(link.query(step.settled_query, left_s()), step.settled_bit)


def as_expected(step: SafeStep, answered: str) -> bool:
    """`expected` is in the instrument's own words, since no driver is at hand here."""
    if isinstance(step.expected, bool):
        return parse_boolean(answered) is step.expected
    if isinstance(step.expected, str):
        return matches(step.expected, answered)
    number = parse_number(answered)
    return number is not None and abs(number - step.expected) <= (step.tolerance or 0.0) * (1 + 1e-9)
