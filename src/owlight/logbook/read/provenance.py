"""What decided the run: plan, texts, instruments, software?"""

from __future__ import annotations

import json
from collections.abc import Mapping

from owlight.logbook.codec import from_json
from owlight.logbook.read.reader import Reader
from owlight.vocabulary.plan import Plan, Source
from owlight.vocabulary.values import Identity, Stamp


def plan(reader: Reader, run_id: str) -> Plan:
    return from_json(reader.value("SELECT plan_json FROM run WHERE run = ?", run_id), Plan)


def sources(reader: Reader, run_id: str) -> tuple[Source, ...]:
    rows = reader.rows(
        "SELECT kind, name, text, sha256 FROM source JOIN source_text USING (sha256) WHERE run = ? ORDER BY kind, name",
        run_id,
    )
    return tuple(Source(row["kind"], row["name"], row["text"], row["sha256"]) for row in rows)


def identities(reader: Reader, run_id: str) -> tuple[Identity, ...]:
    """As they answered in the last segment that asked."""
    rows = reader.rows(
        "SELECT * FROM identity WHERE run = ? AND segment = (SELECT max(segment) FROM identity WHERE run = ?) "
        "ORDER BY role",
        run_id,
        run_id,
    )
    return tuple(
        Identity(
            at=Stamp(row["at_utc"], 0.0, 0),
            role=row["role"],
            resource=row["resource"],
            maker=row["maker"],
            model=row["model"],
            serial_number=row["serial_number"],
            firmware=row["firmware"],
            driver=row["driver"],
        )
        for row in rows
    )


def software(reader: Reader, run_id: str) -> Mapping[str, str]:
    text = reader.value("SELECT versions_json FROM run JOIN software USING (software_id) WHERE run = ?", run_id)
    return dict(json.loads(text))


def run_facts(reader: Reader, run_id: str) -> Mapping[str, str]:
    """Host, operator, command line and what it reproduces."""
    row = reader.rows(
        "SELECT host, operator, command_line, reproduces, captures_sha256 FROM run WHERE run = ?", run_id
    )[0]
    return {name: row[name] or "" for name in row.keys()}  # noqa: SIM118  a Row iterates over values
