"""Connections as durability needs them, and SQLite's troubles in two sentences.

One read-write connection a file keeps out of the way of a defect in the write-ahead log of SQLite before 3.51.3
(sqlite.org/wal.html, section 11); readers open read-only.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from importlib import resources
from pathlib import Path
from typing import Any

import numpy as np

from owlight.errors import StorageError

VERSION = 1
BUSY_MS = 10_000
_LOGBOOK_ID = 0x6F776C31  # "owl1": `file` and our opener recognise a logbook
_CAPTURES_ID = 0x6F776C32


def _plain(value: Any) -> Any:
    return value.item()


for _scalar in (np.int8, np.int16, np.int32, np.int64, np.uint8, np.uint16, np.uint32, np.uint64, np.float32, np.bool_):
    sqlite3.register_adapter(_scalar, _plain)  # without it a numpy scalar is bound as raw bytes


@contextmanager
def troubles(path: Path) -> Iterator[None]:
    """Any SQLite failure becomes a StorageError that says what is safe and what to do."""
    try:
        yield
    except sqlite3.OperationalError as trouble:
        words = str(trouble)
        advice = "Look at the disk and the folder's permissions, then start again."
        if "full" in words:
            advice = "Free disk space, then measure the missing points again."
        elif "locked" in words or "busy" in words:
            advice = "Close the program that holds the file open, then start again."
        raise StorageError(f"{path} could not be written ({words}); what it held before is safe. {advice}") from trouble
    except OSError as trouble:
        raise StorageError(
            f"{path} could not be written ({trouble.strerror}); what it held before is safe. "
            "Look at the disk and the folder's permissions, then start again."
        ) from trouble
    except sqlite3.Error as trouble:
        raise StorageError(
            f"{path} refused what it was given or is damaged ({trouble}); nothing of it was changed. "
            "Copy the file before anything else, then look at it with sqlite3's integrity_check."
        ) from trouble


def open_logbook(path: Path) -> sqlite3.Connection:
    """The one read-write connection, made and brought up to date."""
    with troubles(path):
        connection = _writer(path, page_size=4096, autocheckpoint=1000)
        _bring_up_to_date(connection, "logbook", _LOGBOOK_ID, path)
        return connection


def open_captures(path: Path) -> sqlite3.Connection:
    """64 KiB pages: twice the write rate of 4 KiB ones for rows of megabytes."""
    with troubles(path):
        connection = _writer(path, page_size=65536, autocheckpoint=256)
        _bring_up_to_date(connection, "captures", _CAPTURES_ID, path)
        return connection


def open_read_only(path: Path) -> sqlite3.Connection:
    """A reader cannot hold up the writer: read-only, and every query of ours is short."""
    if not path.is_file():
        raise StorageError(f"There is no {path.name} in {path.parent}. Name the folder that holds it.")
    with troubles(path):
        connection = sqlite3.connect(f"{path.resolve().as_uri()}?mode=ro", uri=True, isolation_level=None)
        connection.row_factory = sqlite3.Row
        connection.execute(f"PRAGMA busy_timeout = {BUSY_MS}")
        connection.execute("PRAGMA trusted_schema = OFF")
        _refuse_newer(connection, path)
        return connection


def _writer(path: Path, page_size: int, autocheckpoint: int) -> sqlite3.Connection:
    connection = sqlite3.connect(path, isolation_level=None)
    connection.row_factory = sqlite3.Row
    for pragma in (
        f"page_size = {page_size}",
        f"busy_timeout = {BUSY_MS}",
        "journal_mode = WAL",
        "synchronous = FULL",
        f"wal_autocheckpoint = {autocheckpoint}",
        "foreign_keys = ON",
        "secure_delete = OFF",
        "trusted_schema = OFF",
    ):
        connection.execute(f"PRAGMA {pragma}")
    return connection


def _version(connection: sqlite3.Connection) -> int:
    return int(connection.execute("PRAGMA user_version").fetchone()[0])


def _refuse_newer(connection: sqlite3.Connection, path: Path) -> int:
    version = _version(connection)
    if version > VERSION:
        raise StorageError(
            f"{path} was written by a newer version of this program (schema {version}, known {VERSION}); "
            "nothing was changed. Use the newer version."
        )
    return version


def _bring_up_to_date(connection: sqlite3.Connection, schema: str, application_id: int, path: Path) -> None:
    """Each step in one transaction with its version number, so that a step is done whole or not at all."""
    for version in range(_refuse_newer(connection, path) + 1, VERSION + 1):
        script = resources.files("owlight.logbook.schema").joinpath(f"{schema}_{version}.sql").read_text("utf-8")
        closing = f"PRAGMA application_id = {application_id}; PRAGMA user_version = {version}; COMMIT;"
        connection.executescript(f"BEGIN IMMEDIATE; {script} {closing}")


@contextmanager
def transaction(connection: sqlite3.Connection) -> Iterator[None]:
    """BEGIN IMMEDIATE: waits for the lock at the start, where waiting is allowed, and never half-way."""
    connection.execute("BEGIN IMMEDIATE")
    try:
        yield
    except BaseException:
        connection.rollback()
        raise
    connection.execute("COMMIT")
