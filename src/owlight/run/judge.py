"""What is judged at every stay, from what is known there: tap before and after, meter floor, each demodulation."""

from __future__ import annotations

from owlight.bench import Bench
from owlight.quantity import watts
from owlight.statistics.checks import stay as checks
from owlight.theory import ber_of_snr_db
from owlight.vocabulary.captures import Demodulation
from owlight.vocabulary.events import Check, ReceivedPower
from owlight.vocabulary.plan import Attempt, Plan
from owlight.vocabulary.terms import RECEIVED_POWER

BEAT_WINDOW_HZ = (-3.0e9, 3.0e9)
"""Common practice for two free-running lasers set to one channel; further apart something is set wrong."""


def judge_stay(
    attempt: Attempt, power: ReceivedPower | None, found: tuple[Demodulation, ...], plan: Plan, paper: Bench
) -> tuple[Check, ...]:
    subject = f"stay {attempt.point.index}/{attempt.number}"
    answers: list[Check] = []
    if power is not None:
        answers.append(checks.power_before_and_after(subject, power.tap_before_w, power.tap_after_w))
        floor_dbm = paper.role["power_meter"].floor_dbm
        if floor_dbm is not None:
            answers.append(checks.meter_floor(subject, power.tap_before_w, watts(floor_dbm)))
    ber_of = ber_of_snr_db(plan.signal.modulation) if plan.signal else None
    for demodulation in found:
        answers += checks.demodulation(demodulation, ber_of, BEAT_WINDOW_HZ)
    return tuple(answers)


def wanted_power_dbm(attempt: Attempt) -> float | None:
    value = attempt.point.value(RECEIVED_POWER)
    return None if value is None else float(value)
