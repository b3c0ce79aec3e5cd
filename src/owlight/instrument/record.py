"""One lane of a record: from the block of an instrument to codes with their volts."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from owlight.driver import Record
from owlight.errors import InstrumentError
from owlight.link import Link
from owlight.scpi import parse_number
from owlight.vocabulary.captures import Codes

_QUERY_DEADLINE_S = 5.0
_SMALLEST_BLOCK_BYTES = 1 << 20  # a record that is too long is still read: it is a finding


@dataclass(frozen=True, eq=False)
class LaneRecord:
    """One lane as it was digitised: volts = codes * volts_per_code + offset_v."""

    codes: Codes
    volts_per_code: float
    offset_v: float


def fetch_lane(link: Link, record: Record, channel: int, samples: int, range_v: float | None) -> LaneRecord:
    """`range_v` is the full range as it was read back, needed where the scaling follows from it."""
    codes = _codes(link, record, channel, samples)
    if record.scaling.by == "queries":
        queries = (record.scaling.volts_per_code, record.scaling.offset)
        volts, offset = (_number(link, query.replace("{channel}", str(channel))) if query else 0.0 for query in queries)
        return LaneRecord(codes, volts, offset)
    if range_v is None or math.isnan(range_v):
        raise InstrumentError(
            f"The range of channel {channel} of {link.role} is not known, so its codes have no volts. Set it first.",
            link.role,
        )
    return LaneRecord(codes, range_v / record.scaling.codes_per_range, 0.0)


def _codes(link: Link, record: Record, channel: int, samples: int) -> Codes:
    expected = samples * record.bytes_per_sample
    data = link.query_block(
        record.fetch.replace("{channel}", str(channel)),
        max(2 * expected, _SMALLEST_BLOCK_BYTES),
        record.fetch_at_most_s,
        record.terminator_after_block,
    )
    whole = data[: data.size - data.size % record.bytes_per_sample]
    if record.bytes_per_sample == 1:
        return whole.view(np.int8)
    return whole.view("<i2" if record.byte_order == "least significant first" else ">i2").astype(np.int16)


def _number(link: Link, query: str) -> float:
    answered = link.query(query, _QUERY_DEADLINE_S)
    try:
        found = parse_number(answered)
    except ValueError:
        found = None
    if found is None or not math.isfinite(found):
        raise InstrumentError(
            f"{link.role} answers {query} with {answered[:80]!r}, so its codes have no volts. "
            "The record is not used; its driver file does not fit it.",
            link.role,
        )
    return found
