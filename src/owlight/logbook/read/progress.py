"""What happened along the way: events, findings, settings and readings in order."""

from __future__ import annotations

import sqlite3

from owlight.logbook.read.reader import Reader


def events(reader: Reader, run_id: str) -> list[sqlite3.Row]:
    return reader.rows("SELECT at_utc, severity, role, words FROM event WHERE run = ? ORDER BY event_id", run_id)


def stays_in_order(reader: Reader, run_id: str) -> list[sqlite3.Row]:
    """Every stay, the failed ones too, in the order of time."""
    return reader.rows("SELECT * FROM stay WHERE run = ? ORDER BY count", run_id)


def out_of_tolerance(reader: Reader, run_id: str) -> list[sqlite3.Row]:
    return reader.rows("SELECT * FROM out_of_tolerance WHERE run = ?", run_id)


def exchanges_in_trouble(reader: Reader, run_id: str) -> list[sqlite3.Row]:
    return reader.rows(
        "SELECT at_utc, role, sent, trouble FROM exchange WHERE run = ? AND trouble <> '' ORDER BY exchange_id", run_id
    )


def exchange_count(reader: Reader, run_id: str) -> int:
    return int(reader.value("SELECT count(*) FROM exchange WHERE run = ?", run_id))
