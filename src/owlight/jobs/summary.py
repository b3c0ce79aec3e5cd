"""One run as one object: what `show`, `run` and `demo` print and what other programs read."""

from __future__ import annotations

import json
from dataclasses import asdict
from pathlib import Path
from typing import Any

from owlight.logbook.read import curve, history, open_reader, provenance, runs
from owlight.logbook.read.reader import Reader
from owlight.statistics import mean_readings, pool
from owlight.vocabulary.events import History
from owlight.vocabulary.plan import Plan
from owlight.vocabulary.result import Conclusion, CurvePoint, Sensitivity, Stay
from owlight.vocabulary.terms import TERMS
from owlight.vocabulary.values import Term

Json = dict[str, Any]


def summary(folder: Path, run_text: str = "last") -> Json:
    """InputError when there is no such run. A conclusion is what was stored, not computed anew."""
    with open_reader(folder) as reader:
        run_id = runs.find_run(reader, run_text)
        header = runs.header(reader, run_id)
        plan = provenance.plan(reader, run_id)
        finished = history.history(reader, run_id)
        conclusion = curve.conclusion(reader, run_id) or _so_far(plan, curve.stays(reader, run_id), header.state)
        return {
            "run_id": run_id,
            "logbook": str(folder / "logbook.db"),
            "state": header.state,
            "reason": header.reason,
            "simulated": header.simulated,
            "sequence": plan.name,
            "modulation": plan.signal.modulation if plan.signal else None,
            "seed": plan.seed,
            "started_utc": header.started_utc,
            "ended_utc": header.ended_utc,
            "simulated_time": plan.simulated,
            **_stays(plan, finished, header.planned_stays),
            **_measurand(plan),
            **_results(conclusion),
            "readings": _readings(finished),
            "safe_state": _safe_state(runs.safe_state(reader, run_id)) or _by_the_guard(folder, reader, header),
        }


def _stays(plan: Plan, finished: History, planned: int) -> Json:
    """`missing`: planned points that no stay measured. A point without lock was measured, and says so."""
    measured = {stay.attempt.point.index for stay in finished if stay.outcome == "ok"}
    return {
        "stays_planned": planned,
        "stays_done": sum(stay.outcome == "ok" for stay in finished),
        "stays_failed": sum(stay.outcome != "ok" for stay in finished),
        "missing": sorted({index for indices in plan.order for index in indices} - measured),
    }


def _readings(finished: History) -> list[Json]:
    """What each stay read, the mean of its readings before and after; a failed stay gives none."""
    return [
        {
            "point": stay.attempt.point.index,
            "attempt": stay.attempt.number,
            "settings": [
                {"term": str(setting.term), "value": setting.value, "unit": _unit(setting.term)}
                for setting in stay.attempt.point.settings
            ],
            "readings": [
                {"term": str(r.term), "value": r.value, "unit": _unit(r.term), "sd": r.standard_deviation}
                for r in mean_readings(stay.readings)
            ],
        }
        for stay in finished
        if stay.outcome == "ok" and stay.readings
    ]


def _unit(term: Term) -> str:
    return TERMS[term].unit if term in TERMS else ""


def _so_far(plan: Plan, stays: tuple[Stay, ...], state: str) -> Conclusion:
    """Of a run that has no conclusion: its counts, and no claim."""
    points = pool(stays, plan.measurand.threshold_ber) if plan.measurand else ()
    return Conclusion(points, (), (), (), (), f"The run is {state}: it has no conclusion.")


def _measurand(plan: Plan) -> Json:
    if plan.measurand is None:
        return {"threshold": None, "reference_plane": None, "power_convention": None}
    return {
        "threshold": {"name": plan.measurand.threshold_name, "ber": plan.measurand.threshold_ber},
        "reference_plane": plan.measurand.reference_plane,
        "power_convention": plan.measurand.power,
    }


def _results(conclusion: Conclusion) -> Json:
    sensitivities = [_sensitivity(found) for found in conclusion.sensitivities]
    penalties = [asdict(penalty) for penalty in conclusion.penalties]
    return {
        "points": [_point(point) for point in conclusion.points],
        "sensitivity": sensitivities[0] if sensitivities else None,
        "sensitivities": sensitivities,
        "penalty_db": penalties[0]["penalty_db"] if penalties else None,
        "penalty_reference": penalties[0]["reference"] if penalties else None,
        "penalties": penalties,
        "findings": [asdict(check) for check in conclusion.checks],
        "budget": [asdict(line) for line in conclusion.budget],
        "words": conclusion.words,
    }


def _point(point: CurvePoint) -> Json:
    found = asdict(point)
    found["findings"] = list(point.findings)
    return found


def _sensitivity(found: Sensitivity) -> Json:
    return {**asdict(found), "curve_a_w": list(found.curve_a_w)}


def _safe_state(stored: Any) -> Json | None:
    if stored is None:
        return None
    return {"confirmed": stored.confirmed, "steps": [asdict(step) for step in stored.steps]}


def _by_the_guard(folder: Path, reader: Reader, header: runs.RunHeader) -> Json | None:
    """Of a run whose process died: what its guard wrote since, told apart by that process's id."""
    died = {row["pid"] for row in reader.rows("SELECT pid FROM segment WHERE run = ?", header.run_id)}
    try:
        lines = [json.loads(line) for line in (folder / "guard.jsonl").read_text("utf-8").splitlines()]
    except (OSError, ValueError):
        return None
    # an id is given out again one day: only what was written after this run began is about it
    ours = [line for line in lines if line["runner_pid"] in died and line["utc"] >= header.started_utc]
    found = next((line for line in reversed(ours) if "steps" in line), None)
    if found is None:
        return None
    return {"confirmed": found["confirmed"], "steps": found["steps"], "by": f"the guard at {found['utc']}"}
