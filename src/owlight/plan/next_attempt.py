"""What is measured next: the one place that decides it, a pure function of the plan and the finished history."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence as Listing
from dataclasses import dataclass

from owlight.plan.durations import start_s
from owlight.vocabulary.events import AttemptFinished, History
from owlight.vocabulary.plan import Attempt, Plan, Point

LAG = 1
"""How many of the latest stays are never looked at: their demodulation may still be under way."""
FEWEST_ERRORS = 10
CAPTURES_OF_A_LIMIT = 5
"""Where fewer than ten errors are to be expected, more captures only burn the night: the point is an upper limit."""

_OURS = frozenset({"pass", "reference", "retry"})


@dataclass
class _Tally:
    """What is known of a point so far."""

    stays_chosen: int = 0
    captures_chosen: int = 0
    locked: int = 0
    errors: int = 0
    bits: int = 0

    def add(self, finished: AttemptFinished) -> None:
        for demodulation in finished.demodulations:
            if demodulation.bits:
                self.locked += 1
                self.errors += demodulation.errors
                self.bits += demodulation.bits


def next_attempt(plan: Plan, history: History) -> Attempt | None:
    """The next stay, or None when the plan has nothing more to ask.

    The decisions so far are replayed, each with what was known then; so a resumed night decides as an uninterrupted
    one. After the last pass each failed stay is repeated once.
    """
    return _Replay(plan, history).decide()


def capped(plan: Plan, history: History) -> dict[int, str]:
    """Points that get no further stay, each with the rule that fired."""
    replay = _Replay(plan, history)
    replay.decide()
    return {index: rule for index in replay.tallies if (rule := replay.rule_fired(plan.points[index]))}


class _Replay:
    def __init__(self, plan: Plan, history: History) -> None:
        self._plan = plan
        self._ours = [done for done in history if done.attempt.reason in _OURS]
        # a stay asked for by something else has a number too, and numbers are never given twice
        self._others = Counter(done.attempt.point.index for done in history if done.attempt.reason not in _OURS)
        self._slots = [index for indices in plan.order for index in indices]
        self._planned_stays = Counter(self._slots)
        self._next_slot = 0
        self.tallies = {point.index: _Tally() for point in plan.points}

    def decide(self) -> Attempt | None:
        for done in range(len(self._ours)):
            self._choose(done)
        return self._choose(len(self._ours))

    def _choose(self, done: int) -> Attempt | None:
        if done > LAG:
            finished = self._ours[done - 1 - LAG]
            self.tallies[finished.attempt.point.index].add(finished)
        while self._next_slot < len(self._slots):
            slot = self._next_slot
            self._next_slot += 1
            point = self._plan.points[self._slots[slot]]
            if not self.rule_fired(point):
                return self._attempt(point, "reference" if point.reference else "pass", slot)
        return self._retry(self._ours[:done])

    def _attempt(self, point: Point, reason: str, slot: int) -> Attempt:
        captures = self._plan.stop.captures_per_stay if self._plan.capture is not None else 0
        tally = self.tallies[point.index]
        tally.stays_chosen += 1
        tally.captures_chosen += captures
        number = tally.stays_chosen + self._others[point.index]
        return Attempt(point, number, captures, reason, start_s(self._plan.conditions) + slot * self._plan.stay_s)

    def _retry(self, known: Listing[AttemptFinished]) -> Attempt | None:
        """Nothing else is left, so the latest stay is waited for and looked at too."""
        failed = [done for done in known if done.outcome == "failed" and done.attempt.reason != "retry"]
        retried = sum(1 for done in known if done.attempt.reason == "retry")
        if retried >= len(failed):
            return None
        return self._attempt(failed[retried].attempt.point, "retry", len(self._slots) + retried)

    def rule_fired(self, point: Point) -> str:
        """Words of the rule that caps the point, empty while none does. A reference is never capped."""
        stop, tally = self._plan.stop, self.tallies[point.index]
        if point.reference or not tally.locked:
            return ""
        if stop.errors is not None and tally.errors >= stop.errors:
            return f"{tally.errors} errors counted, {stop.errors} wanted"
        if stop.bits is not None and tally.bits >= stop.bits:
            return f"{tally.bits} bits counted, {stop.bits} wanted"
        if tally.captures_chosen >= CAPTURES_OF_A_LIMIT:
            expected = tally.errors / tally.locked * self._planned_stays[point.index] * stop.captures_per_stay
            if expected < FEWEST_ERRORS:
                return f"{expected:.1f} errors expected from all its captures, fewer than {FEWEST_ERRORS}"
        return ""
