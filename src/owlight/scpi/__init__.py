"""The controller's side of IEEE 488.2 and SCPI-99 as text and values; nothing here sends anything."""

from owlight.scpi.blocks import BlockError, block_length
from owlight.scpi.errors import ErrorEntry, hint
from owlight.scpi.identity import IdentityText, may_be, tells_serial
from owlight.scpi.words import matches, parse_boolean, parse_number, parse_string, short_form, split, write_number

__all__ = [
    "BlockError",
    "ErrorEntry",
    "IdentityText",
    "block_length",
    "hint",
    "matches",
    "may_be",
    "parse_boolean",
    "parse_number",
    "parse_string",
    "short_form",
    "split",
    "tells_serial",
    "write_number",
]
