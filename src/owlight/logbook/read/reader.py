"""A read-only connection to a logbook."""

from __future__ import annotations

import sqlite3
from pathlib import Path
from typing import Any, Self

from owlight.errors import InputError
from owlight.logbook.database import LOGBOOK_ID, open_read_only, troubles


class Reader:
    """Rows by name; closes with its block."""

    def __init__(self, folder: Path, connection: sqlite3.Connection) -> None:
        self.folder = folder
        self._connection = connection

    def rows(self, query: str, *values: object) -> list[sqlite3.Row]:
        with troubles(self.folder / "logbook.db", "read"):
            return self._connection.execute(query, values).fetchall()

    def value(self, query: str, *values: object) -> Any:
        found = self.rows(query, *values)
        return found[0][0] if found else None

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *trouble: object) -> None:
        self._connection.close()


def open_reader(folder: Path) -> Reader:
    """InputError when the folder holds no logbook."""
    path = folder / "logbook.db"
    if not path.is_file():
        raise InputError(f"There is no logbook in {folder}. Name its folder with --logbook.")
    return Reader(folder, open_read_only(path, LOGBOOK_ID))
