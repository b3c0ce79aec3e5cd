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

from owlight.errors import InputError, StorageError

VERSION = 1
BUSY_MS = 10_000
LOGBOOK_ID = 0x6F776C31  # "owl1": `file` and our opener recognise a logbook
CAPTURES_ID = 0x6F776C32
_WHAT = {LOGBOOK_ID: "logbook", CAPTURES_ID: "captures file"}


def _plain(value: Any) -> Any:
    return value.item()


for _scalar in (np.int8, np.int16, np.int32, np.int64, np.uint8, np.uint16, np.uint32, np.uint64, np.float32, np.bool_):
    sqlite3.register_adapter(_scalar, _plain)  # without it a numpy scalar is bound as raw bytes


@contextmanager
def troubles(path: Path, done: str = "written") -> Iterator[None]:
    """Any SQLite failure becomes a StorageError that says what is safe and what to do; `done`: written or read."""
    try:
        yield
    except sqlite3.OperationalError as trouble:
        words = str(trouble)
        advice = "Look at the disk and the folder's permissions, then start again."
        if "full" in words:
            advice = "Free disk space, then measure the missing points again."
        elif "locked" in words or "busy" in words:
            advice = "Close the program that holds the file open, then start again."
        raise StorageError(f"{path} could not be {done} ({words}); what it held before is safe. {advice}") from trouble
    except OSError as trouble:
        raise StorageError(
            f"{path} could not be {done} ({trouble.strerror}); what it held before is safe. "
            "Look at the disk and the folder's permissions, then start again."
        ) from trouble
    except sqlite3.Error as trouble:
        raise StorageError(
            f"{path} is damaged or refused what was asked of it ({trouble}); nothing of it was changed. "
            "Copy the file before anything else, then look at it with sqlite3's integrity_check."
        ) from trouble


def open_logbook(path: Path) -> sqlite3.Connection:
    """The one read-write connection, made and brought up to date."""
    with troubles(path):
        connection = _writer(path, LOGBOOK_ID, page_size=4096, autocheckpoint=1000)
        _bring_up_to_date(connection, "logbook", LOGBOOK_ID, path)
        return connection


def open_captures(path: Path) -> sqlite3.Connection:
    """64 KiB pages: twice the write rate of 4 KiB ones for rows of megabytes."""
    with troubles(path):
        connection = _writer(path, CAPTURES_ID, page_size=65536, autocheckpoint=256)
        _bring_up_to_date(connection, "captures", CAPTURES_ID, path)
        return connection


def open_read_only(path: Path, application_id: int) -> sqlite3.Connection:
    """A reader cannot hold up the writer: read-only, and every query of ours is short. InputError when not ours."""
    if not path.is_file():
        raise StorageError(f"There is no {path.name} in {path.parent}. Name the folder that holds it.")
    with troubles(path, "read"):
        connection = sqlite3.connect(f"{path.resolve().as_uri()}?mode=ro", uri=True, isolation_level=None)
        connection.row_factory = sqlite3.Row
        connection.execute(f"PRAGMA busy_timeout = {BUSY_MS}")
        connection.execute("PRAGMA trusted_schema = OFF")
        if _pragma(connection, "application_id") != application_id:
            empty = "empty: it is " if _is_empty(connection) else ""
            connection.close()
            raise InputError(
                f"{path} is {empty}not a {_WHAT[application_id]} of this program. Name another folder with --logbook."
            )
        _refuse_newer(connection, path)
        return connection


def _writer(path: Path, application_id: int, page_size: int, autocheckpoint: int) -> sqlite3.Connection:
    connection = sqlite3.connect(path, isolation_level=None)
    connection.row_factory = sqlite3.Row
    connection.execute(f"PRAGMA busy_timeout = {BUSY_MS}")
    # before any pragma that writes: somebody else's file is not ours to change
    if _pragma(connection, "application_id") != application_id and not _is_empty(connection):
        connection.close()
        raise StorageError(
            f"{path} is not a {_WHAT[application_id]} of this program; nothing of it was changed. "
            "Name another folder with --logbook."
        )
    for pragma in (
        f"page_size = {page_size}",
        "journal_mode = WAL",
        "synchronous = FULL",
        f"wal_autocheckpoint = {autocheckpoint}",
        "foreign_keys = ON",
        "secure_delete = OFF",
        "trusted_schema = OFF",
    ):
        connection.execute(f"PRAGMA {pragma}")
    return connection


def _pragma(connection: sqlite3.Connection, name: str) -> int:
    return int(connection.execute(f"PRAGMA {name}").fetchone()[0])


def _is_empty(connection: sqlite3.Connection) -> bool:
    return connection.execute("SELECT 1 FROM sqlite_master LIMIT 1").fetchone() is None


def _refuse_newer(connection: sqlite3.Connection, path: Path) -> int:
    version = _pragma(connection, "user_version")
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
