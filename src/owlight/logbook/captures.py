"""The captures file of one run: samples only, a row a lane; sealed to one plain file at the end."""

from __future__ import annotations

import hashlib
import sqlite3
from collections.abc import Iterable
from pathlib import Path
from typing import Any

import numpy as np

from owlight.errors import StorageError
from owlight.logbook.database import CAPTURES_ID, open_captures, open_read_only, transaction, troubles
from owlight.vocabulary.captures import Capture, CaptureId, Lane
from owlight.vocabulary.values import Stamp

_FORMATS: dict[str, Any] = {"int8": np.dtype("int8"), "int16": np.dtype("<i2")}


def captures_path(folder: Path, run: str) -> Path:
    return folder / "captures" / f"{run}.db"


class CapturesFile:
    """The one writer of a run's samples."""

    def __init__(self, path: Path) -> None:
        self.path = path
        with troubles(path):
            path.parent.mkdir(parents=True, exist_ok=True)
            if path.exists():
                path.chmod(0o644)  # sealed by an earlier segment
        self._connection = open_captures(path)

    def write(self, capture: Capture) -> None:
        """Durable when it returns."""
        with troubles(self.path), transaction(self._connection):
            self._connection.executemany(
                "INSERT INTO waveform VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
                [_row(capture, position, lane) for position, lane in enumerate(capture.lanes)],
            )

    def drop(self, captures: Iterable[CaptureId]) -> None:
        keys = [(c.point, c.attempt, c.number) for c in captures]
        with troubles(self.path), transaction(self._connection):
            self._connection.executemany("DELETE FROM waveform WHERE point = ? AND attempt = ? AND number = ?", keys)

    def drop_all_but(self, known: set[CaptureId]) -> int:
        """Delete captures whose stay never reached the logbook; returns how many captures that were."""
        with troubles(self.path):
            rows = self._connection.execute("SELECT DISTINCT point, attempt, number FROM waveform").fetchall()
        orphans = {CaptureId(*row) for row in rows} - known
        self.drop(orphans)
        return len(orphans)

    def seal(self) -> str | None:
        """One plain read-only file without a log beside it; returns its SHA-256.

        None while somebody else has the file open: then it stays as it is, as safe, and complete with its log.
        """
        with troubles(self.path):
            self._connection.execute("PRAGMA wal_checkpoint(TRUNCATE)")
            try:
                self._connection.execute("PRAGMA journal_mode = DELETE")
            except sqlite3.OperationalError:
                self._connection.close()
                return None
            self._connection.close()
            self.path.chmod(0o444)
            with self.path.open("rb") as file:
                return hashlib.file_digest(file, "sha256").hexdigest()


def _row(capture: Capture, position: int, lane: Lane) -> tuple[object, ...]:
    codes = np.ascontiguousarray(lane.codes)
    name = codes.dtype.name
    if name not in _FORMATS:
        raise StorageError(f"Lane {lane.name} has codes of type {name}; only int8 and int16 can be stored.")
    stored = codes.astype(_FORMATS[name], copy=False)
    return (
        capture.id.point,
        capture.id.attempt,
        capture.id.number,
        position,
        lane.name,
        capture.sample_rate_hz,
        len(codes),
        name,
        lane.volts_per_code,
        lane.offset_v,
        lane.sha256,
        stored.data.cast("B"),
    )


def load(path: Path, identifier: CaptureId) -> Capture:
    """A stored capture with its scaling; clipped fraction, seed and time stand in the logbook, not here."""
    connection = open_read_only(path, CAPTURES_ID)
    try:
        with troubles(path, "read"):
            key = (identifier.point, identifier.attempt, identifier.number)
            rows = connection.execute(
                "SELECT * FROM waveform WHERE point = ? AND attempt = ? AND number = ? ORDER BY position", key
            ).fetchall()
    finally:
        connection.close()
    if not rows:
        raise StorageError(f"{path} holds no capture {key}; it was not kept or never taken. Only its hashes remain.")
    lanes = tuple(_lane(path, row) for row in rows)
    return Capture(identifier, Stamp("", 0.0, 0), float(rows[0]["sample_rate_hz"]), lanes, seed=0)


def _lane(path: Path, row: sqlite3.Row) -> Lane:
    blob = row["codes"]
    if hashlib.sha256(blob).hexdigest() != row["sha256"]:
        raise StorageError(f"{path} is damaged: lane {row['lane']} no longer has the hash it was stored with.")
    codes = np.frombuffer(blob, dtype=_FORMATS[row["sample_format"]])
    return Lane(row["lane"], codes, row["volts_per_code"], row["offset_v"], 0.0, row["sha256"])
