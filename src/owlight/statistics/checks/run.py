"""Every question about a run, asked of what was stored; a question without material is answered "not evaluated"."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

from owlight.statistics.checks import curve, stay
from owlight.statistics.checks.finding import BAD, OK, not_evaluated
from owlight.statistics.pooling import groups
from owlight.statistics.request import BerOfSnrDb
from owlight.vocabulary.captures import Demodulation
from owlight.vocabulary.events import Check
from owlight.vocabulary.result import CurvePoint, Sensitivity, Stay

_SEVERITY = {"bad": 3, "doubtful": 2, "ok": 1, "not evaluated": 0}


@dataclass(frozen=True)
class Evidence:
    """What a run left behind. None means "not known"; an empty error queue is an empty tuple."""

    points: tuple[CurvePoint, ...]
    stays: tuple[Stay, ...] = ()
    demodulations: tuple[Demodulation, ...] = ()
    sensitivities: tuple[Sensitivity, ...] = ()
    threshold_ber: float | None = None
    ber_of_snr_db: BerOfSnrDb | None = None
    meter_floor_w: float | None = None
    beat_window_hz: tuple[float, float] | None = None
    error_queue: tuple[str, ...] | None = None


def run_checks(evidence: Evidence) -> tuple[Check, ...]:
    """Checks of each point, each curve and the run.

    What was asked of every capture or stay is summed up in one check of the run: the worst, and how many are not ok.
    """
    checks = [check for point in evidence.points for check in (curve.error_count(point), curve.lock(point))]
    for group in groups(evidence.stays) or tuple(dict.fromkeys(p.group for p in evidence.points)):
        checks += [_of_group(check, group) for check in _curve_checks(evidence, group)]
    by_capture = [c for found in evidence.demodulations for c in _captures(found, evidence)]
    for name in ("pattern margin", "lane map", "wrong lock", "tributaries alike", "SNR against BER", "beat frequency"):
        checks.append(summed_up(name, [check for check in by_capture if check.name == name], "captures"))
    checks.append(summed_up("power before and after", list(_powers(evidence)), "stays"))
    checks.append(summed_up("meter floor", list(_floors(evidence)), "stays"))
    checks.append(error_queue("run", evidence.error_queue))
    return tuple(checks)


def error_queue(subject: str, entries: Sequence[str] | None) -> Check:
    """Did an instrument report an error that nobody asked for?"""
    if entries is None:
        return not_evaluated("error queue", subject, "the error queues were not read")
    if entries:
        shown = "; ".join(dict.fromkeys(entries))
        return Check("error queue", subject, float(len(entries)), 0.0, BAD, f"{len(entries)} entries: {shown}")
    return Check("error queue", subject, 0.0, 0.0, OK, "no instrument reported an error")


def summed_up(name: str, checks: Sequence[Check], of_what: str) -> Check:
    """The worst of many as one check of the run."""
    judged = [check for check in checks if check.finding != "not evaluated"]
    if not judged:
        words = checks[0].words if checks else f"no {of_what} to ask"
        return not_evaluated(name, "run", words)
    worst = max(judged, key=lambda check: _SEVERITY[check.finding])
    wrong = sum(check.finding != OK for check in judged)
    words = f"{wrong} of {len(judged)} {of_what}"
    if wrong:
        return replace(worst, subject="run", words=f"{words}, first {worst.subject}: {worst.words}")
    return replace(worst, subject="run", words=f"all {len(judged)} {of_what} ok; the first: {worst.words}")


def _curve_checks(evidence: Evidence, group: str) -> Iterator[Check]:
    points = [point for point in evidence.points if point.group == group]
    scatter = [s.stay_scatter_db for s in evidence.sensitivities if s.group == group]
    scatter_db = scatter[0] if scatter else curve.STAY_SCATTER_DB
    yield curve.monotonic(points, scatter_db)
    if evidence.threshold_ber is None:
        yield not_evaluated("slope", "run", "no threshold is stated")
        yield not_evaluated("bracketing", "run", "no threshold is stated")
        return
    if evidence.ber_of_snr_db is None:
        yield not_evaluated("slope", "run", "no formula for this format")
    else:
        yield curve.slope(points, evidence.threshold_ber, evidence.ber_of_snr_db, scatter_db)
    yield curve.bracketing(points, evidence.threshold_ber)


def _of_group(check: Check, group: str) -> Check:
    return replace(check, words=f"{group}: {check.words}") if group else check


def _captures(found: Demodulation, evidence: Evidence) -> tuple[Check, ...]:
    return stay.demodulation(found, evidence.ber_of_snr_db, evidence.beat_window_hz)


def _powers(evidence: Evidence) -> Iterator[Check]:
    for found in evidence.stays:
        subject = f"stay {found.point}/{found.attempt}"
        yield stay.power_before_and_after(subject, found.tap_before_w, found.tap_after_w)


def _floors(evidence: Evidence) -> Iterator[Check]:
    for found in evidence.stays:
        if evidence.meter_floor_w is not None:
            subject = f"stay {found.point}/{found.attempt}"
            yield stay.meter_floor(subject, found.tap_before_w, evidence.meter_floor_w)
