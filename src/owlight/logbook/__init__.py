"""The record of every run: one SQLite file to ask, one captures file a run."""

from owlight.logbook.store import Logbook, Provenance
from owlight.logbook.write import RunWriter

__all__ = ["Logbook", "Provenance", "RunWriter"]
