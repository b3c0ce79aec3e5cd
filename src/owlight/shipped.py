"""The installation: how it was started, where caches lie, shipped data - by path, then the lab's, then what came."""

from __future__ import annotations

import atexit
import difflib
import os
import shutil
import tempfile
from pathlib import Path

from owlight import _bootstrap
from owlight.errors import InputError

KINDS = ("drivers", "sequences", "simulated_instruments")
_CHECKOUT = Path(__file__).resolve().parents[2]
_PACKED = Path(__file__).resolve().parent / "shipped"


def _shipped(kind: str) -> Path:
    """In a checkout the top-level folder, in an installed wheel the packed one."""
    return _PACKED / kind if (_PACKED / kind).is_dir() else _CHECKOUT / kind


def names(kind: str, what: str = "") -> tuple[str, ...]:
    """The shipped names of a kind, without `.toml`; in a folder of several kinds those whose first key is `what`."""
    files = sorted(_shipped(kind).glob("*.toml"))
    return tuple(path.stem for path in files if not what or _first_key(path) == what)


def _first_key(path: Path) -> str:
    lines = path.read_text("utf-8").splitlines()
    return next((line.partition("=")[0].strip() for line in lines if line and not line.startswith("#")), "")


def find(kind: str, name: str, near: Path | None = None, what: str = "") -> Path:
    """The file called `name` (with or without `.toml`, or a path), as seen from the file `near` that names it.

    `what` it should be, a bench for instance, matters only for the words of the InputError.
    """
    base = near.parent if near is not None else Path.cwd()
    spelled = (name, f"{name}.toml") if not name.endswith(".toml") else (name,)
    places = (base, Path.cwd(), base / kind, base.parent / kind, _shipped(kind))
    for place in places:
        for file in spelled:
            if (place / file).is_file():
                return (place / file).resolve()
    shipped = names(kind, what)
    close = difflib.get_close_matches(Path(name).stem, shipped, n=1)
    hint = f"Did you mean {close[0]}?" if close else "Give a path, or one of these names."
    known = ", ".join(shipped) or "none"
    raise InputError(
        f"There is no {what or kind[:-1]} {name!r}: neither as a path, nor shipped, which are: {known}. {hint}"
    )


def user_cache() -> Path:
    """The user's own cache folder for this program; made by whoever writes to it."""
    return Path(_bootstrap.user_cache())


def numba_cache() -> None:
    """Say where compiled kernels are kept, before numba is imported: in the user's own folder.

    Never in a shared place, since what lies there is executed. A user without a folder of his own gets a private one
    that goes with the process; its children find it in their environment.
    """
    if "NUMBA_CACHE_DIR" in os.environ:
        return
    folder = user_cache() / "numba"
    try:
        folder.mkdir(parents=True, exist_ok=True)
        writable = os.access(folder, os.W_OK)
    except OSError:
        writable = False
    if not writable:
        folder = Path(tempfile.mkdtemp(prefix="owlight-"))  # readable by its owner only
        atexit.register(shutil.rmtree, folder, ignore_errors=True)
    os.environ["NUMBA_CACHE_DIR"] = str(folder)


def program() -> str:
    """How this program was started, so that a command it shows can be pasted."""
    return os.environ.get("OWLIGHT_STARTED_AS", "owlight")
