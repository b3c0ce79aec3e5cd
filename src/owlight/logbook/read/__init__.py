"""Questions to a logbook, one file a question; read-only and short, so that a writer never waits."""

from owlight.logbook.read.reader import Reader, open_reader

__all__ = ["Reader", "open_reader"]
