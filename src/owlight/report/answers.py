"""The six questions of the morning, each answered in words."""

from __future__ import annotations

import itertools
import math
import re
import shlex
from collections import Counter
from dataclasses import dataclass

from owlight.quantity import beside
from owlight.report import differences
from owlight.report.facts import Facts
from owlight.report.markup import Inside, Markup, element, together
from owlight.report.wording import begun, counted, level, moment, number, period, ratio, span
from owlight.shipped import program
from owlight.vocabulary.events import Check
from owlight.vocabulary.result import Sensitivity
from owlight.vocabulary.terms import RECEIVED_POWER

_AT_POINT = re.compile(r"(?:point|stay|capture) (\d+)")
_MOST_SHOWN = 4


@dataclass(frozen=True)
class Answer:
    question: str
    headline: Inside
    details: tuple[Inside, ...] = ()
    command: str = ""


def answers(facts: Facts, before: Facts | None) -> tuple[Answer, ...]:
    return (finished(facts), safe(facts), the_number(facts), believe(facts), redo(facts), differs(facts, before))


def finished(facts: Facts) -> Answer:
    h = facts.header
    words = {"measuring": "Not yet: it is measuring.", "finished": "Yes, finished.", "broken off": "No: it broke off."}
    words |= {"called off": "No: it was called off.", "gave up": "No: it gave up."}
    references = sum(point.reference for point in facts.plan.points)
    where = counted(len(facts.plan.points) - references, "point") + (" and the reference" if references else "")
    done = f"{h.stays_done} of {counted(h.planned_stays, 'planned stay')} taken, at {where}"
    lost_s = sum(stay.seconds for stay in facts.history if stay.outcome == "failed")
    faults = f"{counted(h.stays_failed, 'stay')} failed, {counted(h.faults, 'fault')} noted"
    faults += f", {span(lost_s)} lost to them" if lost_s else ""
    reason = (begun(h.reason.rstrip(".")) + ".",) if h.reason and h.state != "finished" else ()
    return Answer(
        "Did it finish?", words[h.state], (*reason, done, faults, period(h.started_utc, h.ended_utc) + clock(facts))
    )


def clock(facts: Facts) -> str:
    """Beside a time of day: a simulated bench's waits pass at once, so its stamps run ahead of the computer's clock."""
    return " (simulated bench time)" if facts.plan.simulated else ""


def safe(facts: Facts) -> Answer:
    question = "Is the bench safe?"
    state = facts.safe_state
    if state is None and facts.header.state == "measuring":
        return Answer(question, "No: light may be on, a run is measuring.")
    if state is None:
        opened = () if facts.identities else ("No instrument was opened by this run.",)
        details = (*opened, "Treat the light as on: look at the bench, or make it safe:", *_guard(facts))
        return Answer(question, "Unknown: no safe state was recorded.", details, _make_safe(facts))
    open_steps = tuple(step for step in state.steps if not step.confirmed)
    if open_steps or not state.confirmed:
        lines = tuple(f"{s.role}: {s.words}, read back {s.read_back or 'nothing'}" for s in open_steps)
        return Answer(question, "Not confirmed.", ("Treat the light as on. Unconfirmed:", *lines), _make_safe(facts))
    lines = tuple(f"{step.role}: {step.words}" for step in state.steps)
    return Answer(question, "Yes, confirmed by read-back.", (*lines, moment(state.at.utc) + clock(facts)))


def _make_safe(facts: Facts) -> str:
    """With the bench as it was named then; `demo` names none, and its bench is found by the stored name."""
    words = shlex.split(facts.written_by["command_line"].replace("--bench=", "--bench "))
    named = [word for option, word in itertools.pairwise(words) if option == "--bench"]
    named += [source.name for source in facts.sources if source.kind == "bench"]
    return f"{program()} safe --bench {shlex.quote(named[0]) if named else 'BENCH'}"


def _guard(facts: Facts) -> tuple[str, ...]:
    log = facts.folder / "guard.jsonl"
    return (f"What the guard did stands in {log.name} beside the logbook.",) if log.is_file() else ()


def the_number(facts: Facts) -> Answer:
    question, m = "What is the number?", facts.plan.measurand
    if facts.plan.capture is None:
        return Answer(question, "There is none: readings were asked for.", _readings(facts))
    if not facts.sensitivities or m is None:
        words = facts.conclusion.words if facts.conclusion else "The run has no conclusion yet."
        return Answer(question, "There is none.", (words or "The sequence states no measurand.",))
    if len(facts.sensitivities) > 1:
        lines = tuple(line for s in facts.sensitivities for line in _one_of_several(s))
        return Answer(question, f"{len(facts.sensitivities)} sensitivities.", (*lines, *_definition(facts)))
    s = facts.sensitivities[0]
    headline = element("span", level(s.received_power_dbm, decimals(s)), class_="result")
    mark = ("Extrapolated: the threshold lies outside the measured points.",) if s.extrapolated else ()
    return Answer(question, headline, (*mark, *intervals(s), *_definition(facts), *_penalty(facts)))


def _readings(facts: Facts) -> tuple[str, ...]:
    well = [stay for stay in facts.history if stay.outcome == "ok"]
    terms = tuple(dict.fromkeys(str(reading.term) for stay in well for reading in stay.readings))
    if not terms:
        return ("No stay gave a reading.",)
    return (
        f"{', '.join(terms)} at {counted(len({s.attempt.point.index for s in well}), 'point')}, in the table below",
    )


def _one_of_several(s: Sensitivity) -> tuple[Inside, str]:
    mark = " (extrapolated)" if s.extrapolated else ""
    value = element("b", level(s.received_power_dbm, decimals(s)))
    return together(s.group, ": ", value, mark), "; ".join(intervals(s))


def intervals(s: Sensitivity) -> tuple[str, str]:
    percent, digits = f"{100 * s.coverage:.0f} %", decimals(s)
    total = f"{number(s.low_dbm, digits)} to {level(s.high_dbm, digits)}"
    statistical = f"{number(s.statistical_low_dbm, digits)} to {level(s.statistical_high_dbm, digits)}"
    return (f"total {percent}: {total}, k = {coverage_factor(s):.2f}", f"statistical {percent}: {statistical}")


def decimals(s: Sensitivity) -> int:
    """So many that the combined standard uncertainty shows two significant digits (JCGM 100, 7.2.6)."""
    combined_db = math.hypot(s.u_statistical_db, s.u_common_db)
    return min(max(1 - math.floor(math.log10(combined_db)), 1), 4) if combined_db > 0 else 3


def coverage_factor(s: Sensitivity) -> float:
    """Half the total interval over the combined standard uncertainty (JCGM 100, 6.2)."""
    return (s.high_dbm - s.low_dbm) / 2 / max(math.hypot(s.u_statistical_db, s.u_common_db), 1e-12)


def _definition(facts: Facts) -> tuple[str, ...]:
    m = facts.plan.measurand
    assert m is not None
    return (f"at BER {ratio(m.threshold_ber)}: {m.threshold_name}", f"received power at {m.reference_plane}; {m.power}")


def _penalty(facts: Facts) -> tuple[str, ...]:
    """The first reference only, its name without what stands in brackets; the rest is below the curve."""
    found = facts.conclusion.penalties if facts.conclusion else ()
    return tuple(f"{beside(p.penalty_db)} {p.reference.split(' (')[0]}" for p in found[:1])


def believe(facts: Facts) -> Answer:
    question, found = "Can I believe it?", Counter(check.finding for check in facts.checks)
    if not facts.checks:
        return Answer(question, unasked(facts))
    headline = "Nothing speaks against it." if not found["doubtful"] + found["bad"] else _against(found)
    if not facts.sensitivities or 2 * found["not evaluated"] > len(facts.checks):
        asked = counted(len(facts.checks), "question")
        headline = f"Not enough was measured to say: {len(facts.checks) - found['not evaluated']} of {asked} answered."
    against = [check for check in facts.checks if check.finding in {"bad", "doubtful"}]
    against.sort(key=lambda check: check.finding)
    lines = [together(element("b", c.finding), f" {c.name}, {c.subject}: {c.words}") for c in against[:_MOST_SHOWN]]
    if len(against) > _MOST_SHOWN:
        lines.append(together(f"and {len(against) - _MOST_SHOWN} more below"))
    tally = (
        f"{found['ok']} ok, {found['doubtful']} doubtful, {found['bad']} bad, {found['not evaluated']} not evaluated"
    )
    return Answer(question, headline, (*lines, tally, *_fit(facts)))


def unasked(facts: Facts) -> str:
    """Why nothing was asked."""
    if facts.conclusion is None:
        return (
            "Nothing was asked yet."
            if facts.header.state == "measuring"
            else "Nothing was asked: it has no conclusion."
        )
    return "Nothing is asked of readings alone."


def _against(found: Counter[str]) -> str:
    words = [counted(found[kind], f"{kind} finding") for kind in ("bad", "doubtful") if found[kind]]
    return "With reserve: " + ", ".join(words) + "."


def _fit(facts: Facts) -> tuple[str, ...]:
    lines = []
    for s in facts.sensitivities:
        p = "" if s.goodness_of_fit_p is None else f"the fit's goodness p = {s.goodness_of_fit_p:.2f}; "
        lines.append(f"{s.group + ': ' if s.group else ''}{p}stays scatter by {number(s.stay_scatter_db, 3)} dB")
    return tuple(lines)


def redo(facts: Facts) -> Answer:
    question, lines = "What to redo?", []
    for index, words in _suspicious(facts).items():
        power_dbm = next((p.value(RECEIVED_POWER) for p in facts.plan.points if p.index == index), None)
        where = f"point {index}" + (f" ({level(power_dbm)})" if isinstance(power_dbm, float) else "")
        lines.append(f"{where}: {'; '.join(dict.fromkeys(words))}")
    missing = facts.header.planned_stays - facts.header.stays_done - facts.header.stays_failed
    if missing > 0 and facts.header.state != "measuring":
        lines.append(f"{counted(missing, 'planned stay')} not taken")
    if not lines:
        return Answer(
            question, "Nothing asks for it.", ("To measure the whole sequence again and compare:",), _again(facts)
        )
    shown = (
        *lines[:_MOST_SHOWN],
        *([f"and {len(lines) - _MOST_SHOWN} more below"] if len(lines) > _MOST_SHOWN else []),
    )
    headline = counted(len(lines), "place") + " to look at."
    return Answer(question, headline, (*shown, "The whole sequence again:"), _again(facts))


def _suspicious(facts: Facts) -> dict[int, list[str]]:
    """Points with what was found at them, worst first."""
    found: dict[int, list[str]] = {}
    wrong = [check for check in facts.checks if check.finding in {"bad", "doubtful"}]
    for check in sorted(wrong, key=lambda check: check.finding):
        place = _AT_POINT.match(check.subject)
        if place:
            found.setdefault(int(place[1]), []).append(check.name)
    for stay in facts.history:
        if stay.outcome == "failed":
            found.setdefault(stay.attempt.point.index, []).append(f"a stay failed: {stay.reason}")
    return found


def _again(facts: Facts) -> str:
    return f"{program()} reproduce {facts.header.run_id[:8]} --logbook {shlex.quote(str(facts.folder))}"


def differs(facts: Facts, before: Facts | None) -> Answer:
    question = "What differs from last time?"
    if before is None:
        return Answer(question, "There is no earlier run.", ("This logbook holds no other of this sequence.",))
    moved = differences.results(facts, before)
    changed = differences.inputs(facts, before)
    headline = begun(moved[0].split(";")[0]) + "." if moved else "No two results to compare."
    shown = changed[:_MOST_SHOWN] or ("Files, instruments, software and seed are the same.",)
    more = (f"and {len(changed) - _MOST_SHOWN} more",) if len(changed) > _MOST_SHOWN else ()
    shared = tuple(begun(line.split("; ", 1)[1]) + "." for line in moved[:1] if "; " in line)
    last = f"Last time: run {before.header.run_id[:8]}, {moment(before.header.started_utc)}."
    return Answer(question, headline, (*shared, *moved[1:], *shown, *more, last))


def finding_word(check: Check) -> Markup:
    """The word carries the meaning; weight and hue only help."""
    return element("span", check.finding, class_="finding " + check.finding.replace(" ", "-"))
