"""One writer a folder: a lock that the system frees when its holder ends, however it ends."""

from __future__ import annotations

import os
import re
import sys
import time
from pathlib import Path
from typing import IO

_TRIES, _PAUSE_S = 3, 0.05
_BEYOND_THE_TEXT = 1 << 30  # Windows forbids reading what is locked, and others should read who holds it


def take_lock(path: Path) -> IO[str] | None:
    """The open file while it is ours, None when another process holds it; OSError where nothing can be written."""
    lock = path.open("a+")
    for _ in range(_TRIES):
        if _take(lock):
            lock.truncate(0)
            lock.write(f"process {os.getpid()} on this computer")
            lock.flush()
            return lock
        time.sleep(_PAUSE_S)  # a reader that only asks holds it for a moment
    lock.close()
    return None


def holder(path: Path) -> str:
    """In words."""
    try:
        return path.read_text().strip() or "an unknown process"
    except OSError:
        return "an unknown process"


def writing_process(path: Path) -> int | None:
    """The id of the live process that holds the lock."""
    try:
        with path.open("r") as lock:
            if _take(lock):
                return None
    except OSError:
        return None
    found = re.search(r"\d+", holder(path))
    return int(found[0]) if found else None


def _take(lock: IO[str]) -> bool:
    try:
        if sys.platform == "win32":
            import msvcrt

            lock.seek(_BEYOND_THE_TEXT)
            msvcrt.locking(lock.fileno(), msvcrt.LK_NBLCK, 1)
        else:
            import fcntl

            fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError:
        return False
    return True
