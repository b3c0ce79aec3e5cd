"""The controller's side of IEEE 488.2 and SCPI-99 as text and values; nothing here sends anything."""

from owlight.scpi.blocks import BlockError, block_length
from owlight.scpi.errors import ErrorEntry, hint
from owlight.scpi.identity import IdentityText
from owlight.scpi.words import matches, parse_boolean, parse_number, parse_string, short_form, split, write_number

__all__ = [
    "BlockError",
    "ErrorEntry",
    "IdentityText",
    "block_length",
    "hint",
    "matches",
    "parse_boolean",
    "parse_number",
    "parse_string",
    "short_form",
    "split",
    "write_number",
]
