"""A statistic held against its limits."""

from __future__ import annotations

from dataclasses import dataclass

from owlight.vocabulary.events import Check

OK, DOUBTFUL, BAD, NOT_EVALUATED = "ok", "doubtful", "bad", "not evaluated"


@dataclass(frozen=True)
class Limits:
    """Doubtful beyond the first, bad beyond the second. `low_is_bad` for statistics that should be large."""

    doubtful: float
    bad: float
    low_is_bad: bool = False

    def finding(self, statistic: float) -> str:
        sign = -1.0 if self.low_is_bad else 1.0
        if sign * statistic > sign * self.bad:
            return BAD
        return DOUBTFUL if sign * statistic > sign * self.doubtful else OK

    def passed(self, statistic: float) -> float:
        """The limit to show: the one that was broken, else the first."""
        return self.bad if self.finding(statistic) == BAD else self.doubtful


def judged(name: str, subject: str, statistic: float, limits: Limits, words: str) -> Check:
    """The check with the finding that its limits give."""
    return Check(name, subject, statistic, limits.passed(statistic), limits.finding(statistic), words)


def certain(name: str, subject: str, statistic: float, limit: float, wrong: bool, words: str) -> Check:
    """A check that is either fine or bad."""
    return Check(name, subject, statistic, limit, BAD if wrong else OK, words)


def not_evaluated(name: str, subject: str, words: str) -> Check:
    """A check for which something was missing: it is neither fine nor bad, and is told."""
    return Check(name, subject, None, None, NOT_EVALUATED, words)
