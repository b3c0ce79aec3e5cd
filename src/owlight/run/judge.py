"""What is judged at every stay, from what is known there: tap before and after, meter floor, pattern, tributaries."""

from __future__ import annotations

from owlight.bench import Bench
from owlight.statistics.checks import stay as checks
from owlight.vocabulary.captures import Demodulation
from owlight.vocabulary.events import Check, ReceivedPower
from owlight.vocabulary.plan import Attempt


def judge_stay(
    attempt: Attempt, power: ReceivedPower | None, demodulations: tuple[Demodulation, ...], paper: Bench
) -> tuple[Check, ...]:
    subject = f"stay {attempt.point.index}/{attempt.number}"
    found: list[Check] = []
    if power is not None:
        found.append(checks.power_before_and_after(subject, power.tap_before_w, power.tap_after_w))
    for demodulation in demodulations:
        found += checks.demodulation(demodulation)
    return tuple(found)
