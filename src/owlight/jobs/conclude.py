"""From a run's stored counts to its conclusion: curve, sensitivity, penalties, budget, checks."""

from __future__ import annotations

from pathlib import Path

from owlight.bench import Bench, common_uncertainty
from owlight.logbook.read import curve, history, open_reader
from owlight.statistics import Reason, SensitivityRequest, budget, estimate, groups, pool
from owlight.statistics.checks import run_checks
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
        checks = _stay_checks(finished)
        return Conclusion((), (), (), (), checks, "The sequence takes no captures: settings and readings are logged.")
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
        lines = lines or budget(request, answer)
    penalties = tuple(penalty for sensitivity in found for penalty in _penalties(plan, bench, sensitivity))
    checks = (*_stay_checks(finished), *run_checks(plan, stays, points, tuple(found)))
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


def _stay_checks(finished: History) -> tuple[Check, ...]:
    """A hundred stays that are ok are one line; whatever is not ok keeps its own."""
    every = [check for stay in finished for check in stay.checks]
    merged: list[Check] = []
    for name in dict.fromkeys(check.name for check in every):
        same = [check for check in every if check.name == name]
        well = [check for check in same if check.finding == "ok"]
        if well:
            worst = well[-1]
            words = f"ok at {len(well)} of {len(same)} places where it was asked"
            merged.append(Check(name, "run", worst.statistic if len(well) == 1 else None, worst.limit, "ok", words))
        merged += [check for check in same if check.finding != "ok"]
    return tuple(merged)


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
