"""The records themselves, and their hashes."""

from __future__ import annotations

from pathlib import Path

from owlight.logbook.captures import captures_path
from owlight.logbook.captures import load as load_from
from owlight.logbook.read.reader import Reader
from owlight.vocabulary.captures import Capture, CaptureId


def load(folder: Path, run_id: str, identifier: CaptureId) -> Capture:
    """StorageError when it was not kept."""
    return load_from(captures_path(folder, run_id), identifier)


def hashes(reader: Reader, run_id: str) -> dict[tuple[CaptureId, str], str]:
    """SHA-256 of every lane of every capture, kept or not."""
    rows = reader.rows("SELECT point, attempt, number, lane, sha256 FROM lane WHERE run = ?", run_id)
    return {(CaptureId(r["point"], r["attempt"], r["number"]), r["lane"]): r["sha256"] for r in rows}
