"""One bench at a time per instrument: a lock file per serial number, since one instrument has many addresses.

The operating system holds the lock, so it ends with the process whatever happens; the file's text says who it was.
"""

from __future__ import annotations

import getpass
import json
import os
import re
import socket
import sys
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import IO

from owlight.errors import InUseError


@dataclass(frozen=True)
class Holder:
    serial_number: str
    resource: str
    who: str
    since: str
    pid: int
    host: str

    def __str__(self) -> str:
        return f"{self.who} on {self.host} (process {self.pid}) since {self.since}, at {self.resource}"


class SerialLock:
    """Held until `release`; `stale` says whose lock was found without its process, empty if none was."""

    def __init__(self, folder: Path, serial_number: str, resource: str, since: str) -> None:
        name = re.sub(r"[^A-Za-z0-9._-]", "_", serial_number)
        folder.mkdir(parents=True, exist_ok=True)
        self.path = folder / f"{name}.lock"
        self.stale = ""
        self._file: IO[str] = self.path.open("a+", encoding="utf-8")
        holder = Holder(serial_number, resource, _who(), since, os.getpid(), socket.gethostname())
        before = self._read()
        if not _take(self._file):
            self._file.close()
            raise _refused(serial_number, before, self.path)
        if before is not None and before.host != holder.host:
            # a lock of the operating system may not reach across a shared home folder
            self._file.close()
            raise _refused(serial_number, before, self.path)
        self.stale = "" if before is None else str(before)
        self._write(json.dumps(asdict(holder)))

    def release(self) -> None:
        if not self._file.closed:
            self._write("")
            self._file.close()

    def _read(self) -> Holder | None:
        self._file.seek(0)
        try:
            return Holder(**json.loads(self._file.read()))
        except (ValueError, TypeError):
            return None

    def _write(self, text: str) -> None:
        self._file.seek(0)
        self._file.truncate()
        self._file.write(text)
        self._file.flush()


def _who() -> str:
    try:
        return getpass.getuser()
    except (KeyError, OSError):
        return "an unknown user"


def _refused(serial_number: str, holder: Holder | None, path: Path) -> InUseError:
    held = "somebody" if holder is None else str(holder)
    return InUseError(
        f"The instrument with serial number {serial_number} is in use by {held}. Nothing was set. "
        f"Wait, or end that run; if it is certain that nobody uses it, delete {path}."
    )


if sys.platform == "win32":
    import msvcrt

    def _take(file: IO[str]) -> bool:
        file.seek(1 << 20)  # beyond the text, which others must still be able to read
        try:
            msvcrt.locking(file.fileno(), msvcrt.LK_NBLCK, 1)
        except OSError:
            return False
        return True

else:
    import fcntl

    def _take(file: IO[str]) -> bool:
        try:
            fcntl.flock(file, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError:
            return False
        return True
