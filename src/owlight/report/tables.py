"""Findings, points, instruments, budget, and what is needed to repeat the run."""

from __future__ import annotations

import math
import shlex

from owlight.quantity import beside, scattered
from owlight.quantity import words as quantity
from owlight.report.answers import coverage_factor, finding_word
from owlight.report.facts import Facts
from owlight.report.markup import Inside, Markup, element, table, together
from owlight.report.wording import NOT_ASSESSED, count, counted, figure, level, number, ratio, ratio_span
from owlight.shipped import program
from owlight.statistics import mean_readings
from owlight.vocabulary.events import Check
from owlight.vocabulary.result import CurvePoint
from owlight.vocabulary.terms import TERMS
from owlight.vocabulary.values import Reading, Term, Value

_KNOWN_BUT_NOT_IN_A_BENCH_FILE = (
    ("polarisation dependence of the tap", "the tap's split may depend on the state of polarisation"),
    ("drift of the path since its calibration", "no second calibration stands beside the first"),
)


def findings(facts: Facts) -> Markup:
    """What is not ok first and singly; a question answered ok at many places is one row."""
    rows: list[tuple[Inside, ...]] = []
    against = [check for check in facts.checks if check.finding in {"bad", "doubtful"}]
    rows += [_single(check) for check in sorted(against, key=lambda check: check.finding)]
    open_ones = [check for check in facts.checks if check.finding == "not evaluated"]
    for words in dict.fromkeys(check.words for check in open_ones):
        same = [check for check in open_ones if check.words == words]
        names, places = tuple(dict.fromkeys(c.name for c in same)), tuple(dict.fromkeys(c.subject for c in same))
        place = places[0] if len(places) == 1 else counted(len(places), "place")
        name, rest = (names[0], "") if len(names) == 1 else (counted(len(names), "question"), ": " + ", ".join(names))
        rows.append((finding_word(same[0]), name, place, "", "", words + rest))
    well = [check for check in facts.checks if check.finding == "ok"]
    for name in dict.fromkeys(check.name for check in well):
        same = [check for check in well if check.name == name]
        rows.append(_merged(same) if len(same) > 1 else _single(same[0]))
    return table(
        ("finding", "question", "where", "figure", "limit", "in words"),
        rows,
        numeric=frozenset({3, 4}),
        kind="findings",
    )


def _single(check: Check) -> tuple[Inside, ...]:
    return (finding_word(check), check.name, check.subject, figure(check.statistic), figure(check.limit), check.words)


def _merged(same: list[Check]) -> tuple[Inside, ...]:
    values = [check.statistic for check in same if check.statistic is not None]
    ends = tuple(dict.fromkeys((figure(min(values)), figure(max(values))))) if values else ()
    shown = " to ".join(ends)
    places = counted(len(same), "place")
    words = same[0].words if len({check.words for check in same}) == 1 else f"first {same[0].subject}: {same[0].words}"
    return (finding_word(same[0]), same[0].name, places, shown, figure(same[0].limit), words)


def points(facts: Facts) -> Markup | None:
    found = facts.conclusion.points if facts.conclusion else ()
    if not found:
        return None
    several = len({point.group for point in found}) > 1
    heads = (
        "received power / dBm",
        "repeatability / dB",
        "errors",
        "bits",
        "BER",
        "95 % interval",
        "stays",
        "locked",
        "remarks",
    )
    rows: list[tuple[Inside, ...]] = []
    for point in found:
        row = _point(point)
        rows.append((point.group, *row) if several else row)
    first = 1 if several else 0
    numeric = frozenset(range(first, first + 8))
    return table(("curve", *heads) if several else heads, rows, numeric)


def _point(point: CurvePoint) -> tuple[Inside, ...]:
    if not point.bits:
        interval, ber = "", ""
    elif point.upper_limit:
        interval, ber = f"below {ratio(point.ber_high)}", "no error seen"
    else:
        interval, ber = ratio_span(point.ber_low, point.ber_high), ratio(point.ber, fixed=True)
    remarks = [*point.findings, *([] if point.fitted or "; ".join(point.findings) else ["not fitted"])]
    locked = f"{point.captures_locked} of {point.captures_total}"
    # a single reading tells nothing of its scatter, and 0 would claim that there is none
    power, u = (
        number(point.received_power_dbm, 3),
        figure(point.received_power_u_db) if point.received_power_u_db else "",
    )
    return (
        power,
        u,
        count(point.errors),
        count(point.bits),
        ber,
        interval,
        str(point.stays),
        locked,
        "; ".join(remarks),
    )


def readings(facts: Facts) -> Markup | None:
    """Settings against mean readings, a row a point."""
    well = [stay for stay in facts.history if stay.outcome == "ok" and stay.readings]
    indices = {stay.attempt.point.index for stay in well}
    shown = [point for point in facts.plan.points if point.index in indices]
    swept = tuple(dict.fromkeys(setting.term for point in shown for setting in point.settings))
    read = tuple(dict.fromkeys(reading.term for stay in well for reading in stay.readings))
    rows: list[tuple[Inside, ...]] = []
    for point in shown:
        stays = [stay for stay in well if stay.attempt.point.index == point.index]
        means = {mean.term: mean for mean in mean_readings(reading for stay in stays for reading in stay.readings)}
        set_to = [_shown(term, point.value(term)) for term in swept]
        figures = [_mean(means.get(term)) for term in read]
        rows.append((*set_to, "reference" if point.reference else "", str(len(stays)), *figures))
    heads = (*map(str, swept), "", "stays", *map(str, read))
    numeric = frozenset(range(len(heads))) - {len(swept)}
    return table(heads, rows, numeric) if rows else None


def _mean(mean: Reading | None) -> str:
    if mean is None:
        return "not read"
    if mean.value is None:
        return "no number"
    if mean.standard_deviation is None:
        return _shown(mean.term, mean.value)
    return scattered(mean.value, mean.standard_deviation, _unit(mean.term)).replace("-", "−")


def _shown(term: Term, value: Value | None) -> str:
    if isinstance(value, float):
        return quantity(value, _unit(term)).replace("-", "−")
    return "" if value is None else str(value)


def _unit(term: Term) -> str:
    return TERMS[term].unit if term in TERMS else ""


def instruments(facts: Facts) -> Markup | None:
    if not facts.identities:
        return None
    roles = facts.bench.role if facts.bench else {}
    day = facts.header.started_utc[:10]
    rows: list[tuple[Inside, ...]] = []
    for i in facts.identities:
        due = roles[i.role].calibration_due if i.role in roles else ""
        overdue = bool(due) and due < day
        shown = element("b", f"overdue since {due}") if overdue else due or "not stated"
        rows.append((i.role, f"{i.maker} {i.model}", i.serial_number, i.firmware, shown, i.driver, i.resource))
    return table(("role", "instrument", "serial number", "firmware", "calibration due", "driver", "resource"), rows)


def calibration(facts: Facts) -> str:
    """The one record that makes the power axis."""
    if facts.bench is None:
        return ""
    record = facts.bench.plane_minus_tap
    return (
        f"Received power is the tap's reading plus {number(record.value_db, 3)} dB (standard uncertainty "
        f"{number(record.standard_uncertainty_db, 3)} dB at {number(record.wavelength_nm, 2)} nm): "
        f"{record.certificate}, {record.date}, mating {record.mating}."
    )


def budget(facts: Facts) -> Markup | None:
    lines = facts.conclusion.budget if facts.conclusion else ()
    if not lines:
        return None
    rows: list[tuple[Inside, ...]] = [
        (line.component, line.kind, NOT_ASSESSED if line.u_db is None else number(line.u_db, 4), line.words)
        for line in lines
    ]
    rows += [(name, "B", NOT_ASSESSED, words) for name, words in _KNOWN_BUT_NOT_IN_A_BENCH_FILE]
    for s in facts.sensitivities:
        combined = math.hypot(s.u_statistical_db, s.u_common_db)
        words = f"total interval {100 * s.coverage:.0f} %: {number(s.low_dbm, 3)} to {level(s.high_dbm, 3)}"
        factor = f", k = {coverage_factor(s):.2f}"
        rows.append(
            (
                element("b", f"combined{', ' + s.group if s.group else ''}"),
                "",
                element("b", number(combined, 4)),
                words + factor,
            )
        )
    return table(
        ("component", "type", "standard uncertainty / dB", "in words"), rows, numeric=frozenset({2}), kind="budget"
    )


def penalties(facts: Facts) -> Markup | None:
    found = facts.conclusion.penalties if facts.conclusion else ()
    lines = [
        f"{p.group + ': ' if p.group else ''}{beside(p.penalty_db)} {p.reference}, {level(p.reference_dbm)}"
        for p in found
    ]
    return element("ul", *(element("li", line) for line in lines), class_="penalties") if lines else None


def repeat(facts: Facts) -> Markup:
    run, folder = facts.header.run_id, shlex.quote(str(facts.folder))
    by = facts.written_by
    software = ", ".join(f"{name} {version}" for name, version in facts.software.items())
    what, query = "the curve", f"select received_power_dbm, errors, bits, ber from ber_curve where run = '{run}'"
    if facts.plan.capture is None:
        columns = "settings, attempt, phase, role, name, value, unit"
        what, query = "every reading", f"select {columns} from stay_reading where run = '{run}'"
    rows: list[tuple[Inside, ...]] = [
        ("run", element("code", run)),
        ("again, and compare", element("code", f"{program()} reproduce {run[:8]} --logbook {folder}")),
        (f"{what} as a table", element("code", f'sqlite3 {shlex.quote(str(facts.folder / "logbook.db"))} "{query}"')),
        ("started as", element("code", by["command_line"])),
        ("seed", str(facts.plan.seed)),
        ("by, on", f"{by['operator']}, {by['host']}"),
        ("software", software),
        ("captures", _captures(facts)),
    ]
    if by["reproduces"]:
        rows.insert(1, ("reproduces", element("code", by["reproduces"])))
    files = [element("li", f"{s.kind} {s.name} ", element("code", s.sha256, class_="hash")) for s in facts.sources]
    words = "The texts that decided the run, kept whole in the logbook, each with its SHA-256:"
    return together(table(("", ""), rows, kind="repeat"), element("p", words), element("ul", *files, class_="files"))


def _captures(facts: Facts) -> Inside:
    sealed = facts.written_by["captures_sha256"]
    name = f"captures/{facts.header.run_id}.db"
    return together(name, ", SHA-256 ", element("code", sealed, class_="hash")) if sealed else f"{name}, not sealed"
