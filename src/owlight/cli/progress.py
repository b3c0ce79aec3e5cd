"""Progress on stderr: a line a stay, with the time left judged from the stays so far."""

from __future__ import annotations

import time  # noqa: TID251  only for the time left on the screen, never for the measurement
from contextlib import suppress
from typing import TextIO

from owlight.vocabulary.events import AttemptFinished, Event, Note, SafeState, SegmentStarted
from owlight.vocabulary.plan import Plan
from owlight.vocabulary.terms import RECEIVED_POWER


class Progress:
    """`show` never raises: what happens to a screen must not happen to a night."""

    def __init__(self, stream: TextIO) -> None:
        self._stream = stream
        self._done = 0
        self._began_s: float | None = None

    def say(self, words: str) -> None:
        # the terminal may have been closed; the run goes on and the logbook has everything
        with suppress(OSError, ValueError):
            print(words, file=self._stream, flush=True)

    def show(self, plan: Plan, event: Event) -> None:
        if isinstance(event, SegmentStarted):
            mark = " (simulated)" if plan.simulated else ""
            self.say(f"{plan.name}{mark}: {sum(len(p) for p in plan.order)} stays at {len(plan.points)} points")
        elif isinstance(event, Note):
            first, *more = event.words.split(". ")  # what to do about it stands in the result
            self.say(f"  {event.severity}: {first}" + "." * bool(more))
        elif isinstance(event, SafeState):
            self.say("Bench safe, confirmed." if event.confirmed else "Safe state NOT confirmed; see below.")
        elif isinstance(event, AttemptFinished):
            self._stay(plan, event)

    def _stay(self, plan: Plan, event: AttemptFinished) -> None:
        now_s = time.monotonic()
        self._began_s = now_s if self._began_s is None else self._began_s
        self._done += 1
        total = max(sum(len(p) for p in plan.order), self._done)
        left = ""
        if self._done > 1:
            left_s = (now_s - self._began_s) / (self._done - 1) * (total - self._done)
            left = f"  about {left_s:.0f} s left" if left_s < 120 else f"  about {left_s / 60:.0f} min left"
        self.say(f"  {self._done:3}/{total}  {_words(event)}{left}")

    def close(self) -> None:
        self._stream.flush()


def _words(event: AttemptFinished) -> str:
    where = _where(event)
    if event.outcome == "failed":
        return f"{where}  failed: {event.reason}"
    locked = [d for d in event.demodulations if d.status == "locked"]
    errors, bits = sum(d.errors for d in locked), sum(d.bits for d in locked)
    if not event.demodulations:
        return where
    if not locked:
        return f"{where}  no lock: {event.demodulations[-1].reason}"
    return f"{where}  {errors:6} errors in {bits} bits" + (
        f"  BER {errors / bits:.2e}" if errors else "  (upper limit)"
    )


def _where(event: AttemptFinished) -> str:
    """The power that was measured, or else what was asked for."""
    point, power = event.attempt.point, event.received_power
    if power is not None and power.received_power_dbm is not None:
        return f"{power.received_power_dbm:8.3f} dBm"
    asked_dbm = point.value(RECEIVED_POWER)
    asked = f"{asked_dbm:g} dBm asked" if isinstance(asked_dbm, float) else ""
    return ", ".join(words for words in (point.group, asked) if words) or f"point {point.index}"
