"""What was counted at which power?"""

from __future__ import annotations

from collections import defaultdict

from owlight.logbook.codec import from_json
from owlight.logbook.read.reader import Reader
from owlight.quantity import watts
from owlight.vocabulary.captures import Tributary
from owlight.vocabulary.result import Conclusion, Stay


def stays(reader: Reader, run_id: str) -> tuple[Stay, ...]:
    """Every stay that ended ok with a measured power, in the order of time; its captures' counts are summed."""
    counts = _tributaries(reader, run_id)
    rows = reader.rows(
        "SELECT * FROM stay WHERE run = ? AND outcome = 'ok' AND received_power_dbm IS NOT NULL AND demodulated > 0 "
        "ORDER BY count",
        run_id,
    )
    return tuple(
        Stay(
            point=row["point"],
            attempt=row["attempt"],
            order=position,
            group=row["curve"],
            reference=bool(row["reference"]),
            reason=row["reason"],
            received_power_w=watts(row["received_power_dbm"]),
            received_power_u_db=row["received_power_u_db"] or 0.0,
            tap_before_w=row["tap_before_w"],
            tap_after_w=row["tap_after_w"],
            tributaries=counts[row["point"], row["attempt"]],
            captures_locked=row["locked"],
            captures_total=row["demodulated"],  # an implausible record says nothing of lock
        )
        for position, row in enumerate(rows)
    )


def _tributaries(reader: Reader, run_id: str) -> defaultdict[tuple[int, int], tuple[Tributary, ...]]:
    """Of the first analysis: what the night itself counted."""
    rows = reader.rows(
        "SELECT point, attempt, tributary, sum(bits) AS bits, sum(errors) AS errors, avg(snr_db) AS snr_db "
        "FROM tributary WHERE analysis = (SELECT min(analysis) FROM analysis WHERE run = ?) "
        "GROUP BY point, attempt, tributary ORDER BY point, attempt, min(position)",
        run_id,
    )
    found: defaultdict[tuple[int, int], tuple[Tributary, ...]] = defaultdict(tuple)
    for row in rows:
        found[row["point"], row["attempt"]] += (Tributary(row["tributary"], row["bits"], row["errors"], row["snr_db"]),)
    return found


def conclusion(reader: Reader, run_id: str) -> Conclusion | None:
    """The newest, or None while the run has none."""
    text = reader.value(
        "SELECT conclusion_json FROM conclusion WHERE run = ? ORDER BY conclusion_id DESC LIMIT 1", run_id
    )
    return None if text is None else from_json(text, Conclusion)
