"""Which software measured: what is stored with a run so that a difference can be named later."""

from __future__ import annotations

import getpass
import platform
import socket
import sqlite3
from importlib import metadata

from owlight import __version__
from owlight.logbook import Provenance

PACKAGES = ("pyvisa", "pyvisa-py", "numpy", "scipy", "numba", "sqlite-utils")


def software() -> dict[str, str]:
    """Names and versions; a package that is not installed as a distribution is named so."""
    versions = {"owlight": __version__, "python": platform.python_version(), "sqlite": sqlite3.sqlite_version}
    versions |= {"platform": platform.platform(), "processor": platform.machine()}
    for package in PACKAGES:
        try:
            versions[package] = metadata.version(package)
        except metadata.PackageNotFoundError:
            versions[package] = "not installed as a package"
    return versions


def operator() -> str:
    try:
        return getpass.getuser()
    except (OSError, KeyError):
        return "unknown"


def provenance(command_line: str, reproduces: str | None) -> Provenance:
    return Provenance(
        software=software(),
        host=socket.gethostname(),
        operator=operator(),
        command_line=command_line,
        reproduces=reproduces,
    )
