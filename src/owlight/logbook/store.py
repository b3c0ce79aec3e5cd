"""The folder: logbook.db, captures/, one writer at a time, and a reserve for the words after the disk is full."""

from __future__ import annotations

import json
import sqlite3
import uuid
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import IO, Self

from owlight.errors import BusyError, InputError, StorageError
from owlight.logbook.captures import CapturesFile, captures_path
from owlight.logbook.codec import from_json, to_json
from owlight.logbook.database import open_logbook, transaction, troubles
from owlight.logbook.lock import holder, take_lock
from owlight.logbook.write import Place, RunWriter
from owlight.vocabulary.plan import Plan

RESERVE_BYTES = 8_000_000


@dataclass(frozen=True)
class Provenance:
    """Who measured with what: `software` maps names to versions."""

    software: Mapping[str, str]
    host: str
    operator: str
    command_line: str
    reproduces: str | None = None


class Logbook:
    """Open for writing; a second writer is refused, readers are not."""

    def __init__(self, folder: Path, lock: IO[str], connection: sqlite3.Connection) -> None:
        self.folder = folder
        self._lock = lock
        self._connection = connection

    @classmethod
    def open(cls, folder: Path) -> Logbook:
        """Make the folder if need be; StorageError when another program writes to it or it cannot be written."""
        path = folder / "logbook.lock"
        try:
            (folder / "captures").mkdir(parents=True, exist_ok=True)
            lock = take_lock(path)
        except OSError as trouble:
            raise StorageError(
                f"The logbook folder {folder} cannot be written ({trouble.strerror}); nothing was started. "
                "Name a folder of yours with --logbook."
            ) from trouble
        if lock is None:
            raise BusyError(f"Another run writes to {folder}: {holder(path)}. Wait for it, or name another --logbook.")
        try:
            _keep_reserve(folder / "reserve.bin")
            return cls(folder, lock, open_logbook(folder / "logbook.db"))
        except StorageError:
            lock.close()
            raise

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *trouble: object) -> None:
        self.close()

    def close(self) -> None:
        self._connection.close()
        self._lock.close()

    def start_run(self, plan: Plan, provenance: Provenance) -> RunWriter:
        """Everything that decides what happens is durable before the first light."""
        run = str(uuid.uuid4())
        with troubles(self.folder / "logbook.db"), transaction(self._connection):
            software_id = _software(self._connection, provenance.software)
            _store_plan(self._connection, run, plan, provenance, software_id)
        return self._writer(run, plan, software_id)

    def continue_run(self, run: str, provenance: Provenance) -> RunWriter:
        """Go on with a stored run in a new segment; captures whose stay was never finished are dropped.

        No command calls it yet: it is where resuming a run will begin.
        """
        with troubles(self.folder / "logbook.db"), transaction(self._connection):
            found = self._connection.execute("SELECT plan_json FROM run WHERE run = ?", (run,)).fetchone()
            if found is None:
                raise InputError(f"There is no run {run!r} in {self.folder}. List them with the command logbook.")
            software_id = _software(self._connection, provenance.software)
        return self._writer(run, from_json(found["plan_json"], Plan), software_id)

    def _writer(self, run: str, plan: Plan, software_id: int) -> RunWriter:
        keep = plan.capture.keep if plan.capture is not None else "none"
        captures = CapturesFile(captures_path(self.folder, run))
        return RunWriter(Place(self.folder, run, software_id, keep), self._connection, captures)


def _store_plan(connection: sqlite3.Connection, run: str, plan: Plan, by: Provenance, software_id: int) -> None:
    connection.execute(
        "INSERT INTO run VALUES (?, ?, ?, ?, ?, strftime('%Y-%m-%dT%H:%M:%f000Z', 'now'), ?, ?, ?, ?, ?, ?, ?, NULL)",
        (
            run,
            plan.name,
            plan.simulated,
            plan.seed,
            software_id,
            by.host,
            by.operator,
            by.command_line,
            by.reproduces,
            sum(len(indices) for indices in plan.order),
            to_json(plan),
            f"captures/{run}.db",
        ),
    )
    for source in plan.sources:
        connection.execute("INSERT OR IGNORE INTO source_text VALUES (?, ?)", (source.sha256, source.text))
        connection.execute("INSERT INTO source VALUES (?, ?, ?, ?)", (run, source.kind, source.name, source.sha256))
    connection.executemany(
        "INSERT INTO point VALUES (?, ?, ?, ?, ?)",
        [(run, p.index, p.reference, p.group, to_json(p.settings)) for p in plan.points],
    )


def _software(connection: sqlite3.Connection, versions: Mapping[str, str]) -> int:
    text = json.dumps(dict(sorted(versions.items())))
    connection.execute("INSERT OR IGNORE INTO software (versions_json) VALUES (?)", (text,))
    return int(connection.execute("SELECT software_id FROM software WHERE versions_json = ?", (text,)).fetchone()[0])


def _keep_reserve(path: Path) -> None:
    """Space that is freed when the disk is full, so that the end of the run can still be written."""
    if path.exists() and path.stat().st_size == RESERVE_BYTES:
        return
    try:
        path.write_bytes(bytes(RESERVE_BYTES))
    except OSError as trouble:
        path.unlink(missing_ok=True)
        raise StorageError(
            f"The disk of {path.parent} has less than {RESERVE_BYTES} bytes free ({trouble.strerror}); "
            "nothing was started. Free disk space, then start again."
        ) from trouble
