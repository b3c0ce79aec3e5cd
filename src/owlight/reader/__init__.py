"""TOML with line numbers into frozen dataclasses, all problems of a file at once."""

from owlight.reader.document import Document, read
from owlight.reader.walk import Within, key_of, nearest

__all__ = ["Document", "Within", "key_of", "nearest", "read"]
