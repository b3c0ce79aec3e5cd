"""Which runs are there, and how does one stand?"""

from __future__ import annotations

import sqlite3
from dataclasses import dataclass

from owlight.errors import InputError
from owlight.logbook.codec import from_json
from owlight.logbook.lock import writing_process
from owlight.logbook.read.reader import Reader
from owlight.vocabulary.events import SafeState, SafeStepOutcome
from owlight.vocabulary.values import Stamp


@dataclass(frozen=True)
class RunHeader:
    """`state`: measuring, finished, broken off, called off or gave up."""

    run_id: str
    name: str
    state: str
    reason: str
    simulated: bool
    started_utc: str
    ended_utc: str
    planned_stays: int
    stays_done: int
    stays_failed: int
    faults: int


def list_runs(reader: Reader) -> tuple[RunHeader, ...]:
    """Newest first."""
    rows = reader.rows("SELECT * FROM run_state ORDER BY started_utc DESC")
    return tuple(_header(reader, row) for row in rows)


def find_run(reader: Reader, text: str) -> str:
    """The run id meant by "last", a whole id or the beginning of one; InputError when none or several fit."""
    if text == "last":
        found = reader.rows("SELECT run FROM run ORDER BY started_utc DESC LIMIT 1")
    else:
        found = reader.rows("SELECT run FROM run WHERE substr(run, 1, ?) = ?", len(text), text)
    if len(found) == 1 and text:
        return str(found[0]["run"])
    if len(found) > 1:
        raise InputError(f"{len(found)} runs begin with {text!r}. Give more characters.")
    raise InputError(f"There is no run {text!r} in {reader.folder}. List them with the command logbook.")


def header(reader: Reader, run_id: str) -> RunHeader:
    return _header(reader, reader.rows("SELECT * FROM run_state WHERE run = ?", run_id)[0])


def earlier(reader: Reader, run_id: str) -> str | None:
    """The run before this one with the same name that came to an end and has a conclusion."""
    found: str | None = reader.value(
        "SELECT o.run FROM run o JOIN run r ON r.run = ? AND o.name = r.name AND o.started_utc < r.started_utc "
        "WHERE EXISTS (SELECT 1 FROM conclusion c WHERE c.run = o.run) ORDER BY o.started_utc DESC LIMIT 1",
        run_id,
    )
    return found


def safe_state(reader: Reader, run_id: str) -> SafeState | None:
    """The last one recorded."""
    rows = reader.rows("SELECT * FROM safe_state WHERE run = ? ORDER BY count DESC LIMIT 1", run_id)
    if not rows:
        return None
    steps = from_json(rows[0]["steps_json"], tuple[SafeStepOutcome, ...])
    return SafeState(Stamp(rows[0]["at_utc"], 0.0, rows[0]["count"]), bool(rows[0]["confirmed"]), steps)


def _header(reader: Reader, row: sqlite3.Row) -> RunHeader:
    state, reason = row["state"], row["end_reason"]
    if not state:
        state = "measuring" if _alive(reader, row) else "broken off"
        reason = "" if state == "measuring" else "the process ended without closing the run"
    return RunHeader(
        run_id=row["run"],
        name=row["name"],
        state=state,
        reason=reason,
        simulated=bool(row["simulated"]),
        started_utc=row["started_utc"],
        ended_utc=row["ended_utc"],
        planned_stays=row["planned_stays"],
        stays_done=row["stays_done"],
        stays_failed=row["stays_failed"],
        faults=row["faults"],
    )


def _alive(reader: Reader, row: sqlite3.Row) -> bool:
    """Before its first segment a run has no process of its own: then the writer that holds the lock is it."""
    writing = writing_process(reader.folder / "logbook.lock")
    return writing is not None and row["pid"] in {writing, None}
