"""One attempt: settings, power before, captures, power after. What waits for demodulation is finished later."""

from __future__ import annotations

import math
from dataclasses import dataclass

from owlight.bench import received_power_dbm
from owlight.capture import check_capture
from owlight.run.apply import apply_settings, of_attenuator
from owlight.run.judge import judge_stay, wanted_power_dbm
from owlight.run.night import Night
from owlight.run.vertical import set_vertical
from owlight.run.waiting import DemodulationFailedError, Waiting
from owlight.vocabulary.captures import CaptureId, Demodulation
from owlight.vocabulary.events import AttemptFinished, Check, ReceivedPower
from owlight.vocabulary.plan import Attempt
from owlight.vocabulary.seeds import seed_for
from owlight.vocabulary.terms import RECEIVED_POWER
from owlight.vocabulary.values import Reading, Stamp, Term

METER = Term("power_meter", "power")
READINGS_A_SIDE = 5
"""Fresh readings of the tap before and again after the captures: their scatter is the reading's own uncertainty."""


@dataclass
class Stay:
    """A stay in progress or waiting for its demodulations."""

    attempt: Attempt
    started: Stamp
    received_power: ReceivedPower | None = None
    readings: tuple[Reading, ...] = ()
    captures: tuple[CaptureId, ...] = ()
    checks: tuple[Check, ...] = ()
    waiting: tuple[Waiting, ...] = ()
    seconds: float = 0.0

    def placeholder(self) -> AttemptFinished:
        """What the planner may know of a stay whose demodulation is still awaited: that it took place."""
        return self._finished(self.started, "ok", "", ())

    def finished(self, night: Night) -> AttemptFinished:
        """Wait for the demodulations and judge the stay."""
        try:
            demodulations = tuple(asked.result() for asked in self.waiting)
        except DemodulationFailedError as trouble:
            return self.failed(night.stamper.stamp(), str(trouble))
        self.checks += judge_stay(self.attempt, self.received_power, demodulations, night.plan, night.bench.paper)
        if self.received_power is not None and self.received_power.received_power_dbm is None:
            words = "the tap read no number before or after the captures, so the stay has no received power"
            return self._finished(night.stamper.stamp(), "failed", words, demodulations)
        bad = [check for check in self.checks if check.finding == "bad" and check.subject.startswith("capture")]
        wanted = night.plan.capture is not None
        if wanted and not demodulations:
            return self._finished(night.stamper.stamp(), "failed", "; ".join(check.words for check in bad), ())
        return self._finished(night.stamper.stamp(), "ok", "", demodulations)

    def failed(self, at: Stamp, reason: str) -> AttemptFinished:
        self.seconds = self.seconds or at.monotonic_s - self.started.monotonic_s
        return self._finished(at, "failed", reason, ())

    def _finished(
        self, at: Stamp, outcome: str, reason: str, demodulations: tuple[Demodulation, ...]
    ) -> AttemptFinished:
        return AttemptFinished(
            at=at,
            attempt=self.attempt,
            outcome=outcome,
            reason=reason,
            started=self.started,
            seconds=self.seconds,
            received_power=self.received_power,
            readings=self.readings,
            captures=self.captures,
            demodulations=demodulations,
            checks=self.checks,
        )


def stay_at(night: Night, stay: Stay) -> None:
    """Measure one stay into `stay`, so that whatever was measured is kept when a link fails half-way."""
    attempt = stay.attempt
    seed = seed_for(night.plan.seed, "stay", attempt.point.index, attempt.number)
    night.announce(seed, attempt.planned_time_s)
    # the received power of the point comes last, after the vertical range was found
    outer = (setting for setting in attempt.point.settings if setting.term != RECEIVED_POWER)
    apply_settings(night, (*of_attenuator(night.plan), *outer))
    set_vertical(night, attempt)
    night.announce(seed, attempt.planned_time_s)
    requested_dbm = wanted_power_dbm(attempt)
    if requested_dbm is not None:
        steered = night.bench.set_received_power(requested_dbm)
        stay.received_power = ReceivedPower(
            requested_dbm=requested_dbm,
            attenuation_set_db=steered.attenuation_set_db,
            attenuation_read_db=steered.attenuation_read_db,
            tap_before_w=None,
            tap_before_sd_w=None,
            tap_after_w=None,
            tap_after_sd_w=None,
            received_power_dbm=None,
            received_power_u_db=None,
        )
    # keys of their own: the noise of a reading must not depend on the route to it, nor on how many captures there were
    night.announce(seed_for(night.plan.seed, "before", attempt.point.index, attempt.number), attempt.planned_time_s)
    before = _read_all(night, stay, "before")
    for number in range(1, attempt.captures + 1):
        _take(night, stay, number)
    night.announce(seed_for(night.plan.seed, "after", attempt.point.index, attempt.number), attempt.planned_time_s)
    after = _read_all(night, stay, "after")
    if stay.received_power is not None:
        stay.received_power = _measured(night, stay.received_power, before, after)
    stay.seconds = night.clock.monotonic_s() - stay.started.monotonic_s


def _read_all(night: Night, stay: Stay, phase: str) -> Reading | None:
    """The tap first, with its scatter, then whatever else the sequence wants logged; returns the tap's reading."""
    tap = None
    if stay.received_power is not None:
        tap = night.bench.read(METER, count=READINGS_A_SIDE, phase=phase)
        stay.readings += (tap,)
    for term in night.plan.readings:
        if tap is None or term != METER:
            stay.readings += (night.bench.read(term, phase=phase),)
    return tap


def _take(night: Night, stay: Stay, number: int) -> None:
    """One capture; an implausible one is kept with its finding and is never demodulated."""
    request = night.plan.capture
    if request is None or night.demodulate_later is None:
        return
    attempt = stay.attempt
    night.clock.checkpoint()
    seed = seed_for(night.plan.seed, "capture", attempt.point.index, attempt.number, number)
    night.announce(seed, attempt.planned_time_s)
    identifier = CaptureId(attempt.point.index, attempt.number, number)
    capture = night.bench.capture(identifier, seed, attempt.planned_time_s, request)
    night.emit(capture)
    stay.captures += (identifier,)
    checks = check_capture(capture, frozenset(night.seen_sha256), request.record_length)
    stay.checks += checks
    night.seen_sha256 |= {lane.sha256 for lane in capture.lanes}
    if all(check.finding != "bad" for check in checks):
        stay.waiting += (night.demodulate_later(capture),)


def _measured(night: Night, steered: ReceivedPower, before: Reading | None, after: Reading | None) -> ReceivedPower:
    """The x axis: the tap before and after, averaged in watts, through the one calibrated record."""
    sides = [r for r in (before, after) if r is not None and r.value is not None]
    mean_w = sum(side.value or 0.0 for side in sides) / 2.0
    level_dbm, u_db = None, None
    # one side alone would be another measurand than the others' mean
    if len(sides) == 2 and mean_w > 0.0:
        level_dbm = received_power_dbm(night.bench.paper, mean_w)
        u_w = math.sqrt(sum((side.standard_deviation or 0.0) ** 2 / READINGS_A_SIDE for side in sides)) / 2.0
        u_db = 10.0 / math.log(10.0) * u_w / mean_w
    return ReceivedPower(
        requested_dbm=steered.requested_dbm,
        attenuation_set_db=steered.attenuation_set_db,
        attenuation_read_db=steered.attenuation_read_db,
        tap_before_w=before.value if before else None,
        tap_before_sd_w=before.standard_deviation if before else None,
        tap_after_w=after.value if after else None,
        tap_after_sd_w=after.standard_deviation if after else None,
        received_power_dbm=level_dbm,
        received_power_u_db=u_db,
    )
