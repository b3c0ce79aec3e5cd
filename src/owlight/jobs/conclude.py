"""From a run's stored counts to its conclusion: curve, sensitivity, penalties, budget, checks."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

from owlight.bench import Bench, common_uncertainty
from owlight.logbook.read import curve, history, open_reader
from owlight.quantity import watts
from owlight.run.judge import BEAT_WINDOW_HZ
from owlight.statistics import Reason, SensitivityRequest, budget, estimate, groups, pool
from owlight.statistics.checks import Evidence, run_checks
from owlight.statistics.checks.run import summed_up
from owlight.theory import ReceiverBelief, ber_of_snr_db, predicted_sensitivity_dbm, shot_noise_limit_dbm
from owlight.vocabulary.events import Check, History
from owlight.vocabulary.plan import Plan
from owlight.vocabulary.result import BudgetLine, Conclusion, Penalty, Sensitivity, Stay
from owlight.vocabulary.terms import LO_POWER
from owlight.vocabulary.values import Term

SHOT_NOISE = "the shot-noise limit (phase diversity, quantum efficiency 1, matched filter)"
PREDICTED = "what the bench file's receiver figures predict (shot, thermal and residual LO intensity noise)"


def conclude(plan: Plan, folder: Path, run_id: str, bench: Bench) -> Conclusion:
    """What the counts say. Without a measurand there is nothing to conclude but the checks of the stays."""
    with open_reader(folder) as reader:
        stays = curve.stays(reader, run_id)
        finished = history.history(reader, run_id)
    if plan.measurand is None or plan.signal is None or plan.capture is None:
        return Conclusion((), (), (), (), (), "The sequence takes no captures: settings and readings are logged.")
    points = pool(stays, plan.measurand.threshold_ber)
    found: list[Sensitivity] = []
    reasons: list[str] = []
    lines: tuple[BudgetLine, ...] = ()
    for group in groups(stays):
        request = _request(plan, bench, tuple(stay for stay in stays if stay.group == group))
        answer = estimate(request)
        if isinstance(answer, Reason):
            reasons.append(f"{group}: {answer.words}" if group else answer.words)
            continue
        found.append(answer)
        lines += _budget(request, answer)
    penalties = tuple(penalty for sensitivity in found for penalty in _penalties(plan, bench, sensitivity))
    checks = _all_checks(plan, bench, finished, stays, tuple(found))
    words = " ".join(reasons) or "" if stays else "No stay gave a count."
    return Conclusion(points, tuple(found), penalties, lines, checks, words)


def _request(plan: Plan, bench: Bench, stays: tuple[Stay, ...]) -> SensitivityRequest:
    assert plan.measurand is not None and plan.signal is not None and plan.capture is not None
    return SensitivityRequest(
        stays=stays,
        threshold_ber=plan.measurand.threshold_ber,
        ber_of_snr_db=ber_of_snr_db(plan.signal.modulation),
        common=common_uncertainty(bench),
        meter_zero_u_w=bench.meter.zero_u_w,
        seed=plan.seed,
        vertical=plan.capture.vertical,
    )


def _budget(request: SensitivityRequest, answer: Sensitivity) -> tuple[BudgetLine, ...]:
    """Each curve has its own scatter, so its lines carry its name."""
    lines = budget(request, answer)
    if not answer.group:
        return lines
    return tuple(replace(line, component=f"{line.component} ({answer.group})") for line in lines)


def _record_checks(finished: History) -> tuple[Check, ...]:
    """Whether records and lanes are as believed: asked of each capture, answered once for the run."""
    every = [check for stay in finished for check in stay.checks]
    names = ("clipping", "dead lane", "duplicate capture", "record length")
    return tuple(summed_up(name, [c for c in every if c.name == name], "captures") for name in names)


def _all_checks(
    plan: Plan, bench: Bench, finished: History, stays: tuple[Stay, ...], found: tuple[Sensitivity, ...]
) -> tuple[Check, ...]:
    assert plan.measurand is not None and plan.signal is not None
    floor_dbm = bench.role["power_meter"].floor_dbm if "power_meter" in bench.role else None
    evidence = Evidence(
        points=pool(stays, plan.measurand.threshold_ber),
        stays=stays,
        demodulations=tuple(each for stay in finished for each in stay.demodulations),
        sensitivities=found,
        threshold_ber=plan.measurand.threshold_ber,
        ber_of_snr_db=ber_of_snr_db(plan.signal.modulation),
        meter_floor_w=None if floor_dbm is None else watts(floor_dbm),
        beat_window_hz=BEAT_WINDOW_HZ,
        # a setting or record that left an entry failed its stay, and the stay says which entry it was
        error_queue=tuple(stay.reason for stay in finished if stay.outcome == "failed" and "error" in stay.reason),
    )
    return (*_record_checks(finished), *run_checks(evidence))


def _penalties(plan: Plan, bench: Bench, found: Sensitivity) -> list[Penalty]:
    assert plan.measurand is not None and plan.signal is not None
    signal, ber = plan.signal, plan.measurand.threshold_ber
    wavelength_nm = _setting(plan, Term("signal_laser", "wavelength")) or bench.plane_minus_tap.wavelength_nm
    limit_dbm = shot_noise_limit_dbm(
        signal.modulation, ber, signal.symbol_rate_bd, wavelength_nm, polarisations=signal.polarisations
    )
    penalties = [Penalty(SHOT_NOISE, found.received_power_dbm - limit_dbm, limit_dbm, found.group)]
    belief = _belief(plan, bench, found.group)
    if belief is not None:
        predicted_dbm = predicted_sensitivity_dbm(belief, signal.modulation, ber, signal.symbol_rate_bd)
        penalties.append(Penalty(PREDICTED, found.received_power_dbm - predicted_dbm, predicted_dbm, found.group))
    return penalties


def _belief(plan: Plan, bench: Bench, group: str) -> ReceiverBelief | None:
    """None where the bench file does not state the figures a prediction needs."""
    receiver = bench.receiver
    lo_power_dbm = _setting(plan, LO_POWER)
    if lo_power_dbm is None:
        swept = {point.group: point.value(LO_POWER) for point in plan.points}
        lo_power_dbm = _number(swept.get(group))
    splitting = 4 * receiver.polarisations
    responsivity = receiver.diode_responsivity_a_per_w or splitting * (receiver.port_responsivity_a_per_w or 0.0)
    if lo_power_dbm is None or not responsivity or receiver.thermal_noise_a_per_sqrt_hz is None:
        return None
    if receiver.lo_intensity_noise_db_per_hz is not None and receiver.common_mode_rejection_db is None:
        return None  # what of the intensity noise is left after balancing would be a guess
    return ReceiverBelief(
        responsivity_a_per_w=responsivity,
        lo_power_dbm=lo_power_dbm,
        lane_noise_a_per_sqrt_hz=receiver.thermal_noise_a_per_sqrt_hz,
        polarisations=receiver.polarisations,
        rin_db_per_hz=receiver.lo_intensity_noise_db_per_hz,
        balance_db=-(receiver.common_mode_rejection_db or 0.0),
    )


def _setting(plan: Plan, term: Term) -> float | None:
    return _number(next((setting.value for setting in plan.settings if setting.term == term), None))


def _number(value: object) -> float | None:
    return float(value) if isinstance(value, int | float) else None
