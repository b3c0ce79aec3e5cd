"""The folder: logbook.db, captures/, one writer at a time, and a reserve for the words after the disk is full."""

from __future__ import annotations

import json
import os
import sqlite3
import sys
import uuid
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import IO, Self

from owlight.errors import StorageError
from owlight.logbook.captures import CapturesFile, captures_path
from owlight.logbook.codec import to_json
from owlight.logbook.database import open_logbook, transaction, troubles
from owlight.logbook.write import RunWriter
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
        try:
            (folder / "captures").mkdir(parents=True, exist_ok=True)
            lock = (folder / "logbook.lock").open("a+")
        except OSError as trouble:
            raise StorageError(
                f"The logbook folder {folder} cannot be written ({trouble.strerror}); nothing was started. "
                "Name a folder of yours with --logbook."
            ) from trouble
        if not take(lock):
            lock.seek(0)
            holder = lock.read().strip() or "an unknown process"
            lock.close()
            raise StorageError(f"Another run writes to {folder}: {holder}. Wait for it, or name another --logbook.")
        lock.truncate(0)
        lock.write(f"process {os.getpid()} on this computer")
        lock.flush()
        _keep_reserve(folder / "reserve.bin")
        return cls(folder, lock, open_logbook(folder / "logbook.db"))

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
        path = self.folder / "logbook.db"
        with troubles(path), transaction(self._connection):
            software_id = _software(self._connection, provenance.software)
            self._connection.execute(
                "INSERT INTO run VALUES (?, ?, ?, ?, ?, strftime('%Y-%m-%dT%H:%M:%fZ', 'now'), ?, ?, ?, ?, ?, ?, ?, "
                "NULL)",
                (
                    run,
                    plan.name,
                    plan.simulated,
                    plan.seed,
                    software_id,
                    provenance.host,
                    provenance.operator,
                    provenance.command_line,
                    provenance.reproduces,
                    sum(len(indices) for indices in plan.order),
                    to_json(plan),
                    f"captures/{run}.db",
                ),
            )
            for source in plan.sources:
                self._connection.execute(
                    "INSERT OR IGNORE INTO source_text VALUES (?, ?)", (source.sha256, source.text)
                )
                self._connection.execute(
                    "INSERT INTO source VALUES (?, ?, ?, ?)", (run, source.kind, source.name, source.sha256)
                )
            self._connection.executemany(
                "INSERT INTO point VALUES (?, ?, ?, ?, ?)",
                [(run, p.index, p.reference, p.group, to_json(p.settings)) for p in plan.points],
            )
        keep = plan.capture.keep if plan.capture is not None else "none"
        captures = CapturesFile(captures_path(self.folder, run))
        return RunWriter(run, self._connection, captures, path, software_id, keep)


def _software(connection: sqlite3.Connection, versions: Mapping[str, str]) -> int:
    text = json.dumps(dict(sorted(versions.items())))
    connection.execute("INSERT OR IGNORE INTO software (versions_json) VALUES (?)", (text,))
    return int(connection.execute("SELECT software_id FROM software WHERE versions_json = ?", (text,)).fetchone()[0])


def take(lock: IO[str]) -> bool:
    """True when nobody else holds it; the system frees it when its holder ends, however it ends."""
    try:
        if sys.platform == "win32":
            import msvcrt

            msvcrt.locking(lock.fileno(), msvcrt.LK_NBLCK, 1)
        else:
            import fcntl

            fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError:
        return False
    return True


def _keep_reserve(path: Path) -> None:
    """Space that is freed when the disk is full, so that the end of the run can still be written."""
    if path.exists() and path.stat().st_size == RESERVE_BYTES:
        return
    try:
        path.write_bytes(bytes(RESERVE_BYTES))
    except OSError as trouble:
        raise StorageError(
            f"The disk of {path.parent} has less than {RESERVE_BYTES} bytes free ({trouble.strerror}); "
            "nothing was started. Free disk space, then start again."
        ) from trouble
