"""One connection to one instrument: text and blocks out and in, bounded in time, every exchange on record."""

from owlight.link.link import Link
from owlight.link.memory import memory_opener
from owlight.link.session import Opener, Session
from owlight.link.stamper import Stamper
from owlight.link.visa import open_visa

__all__ = ["Link", "Opener", "Session", "Stamper", "memory_opener", "open_visa"]
