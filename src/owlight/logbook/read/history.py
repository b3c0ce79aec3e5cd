"""What was done so far, as the planner needs it?"""

from __future__ import annotations

from owlight.logbook.codec import from_json
from owlight.logbook.read.reader import Reader
from owlight.vocabulary.events import AttemptFinished, History


def history(reader: Reader, run_id: str) -> History:
    """Every stay in the order in which it began."""
    rows = reader.rows("SELECT finished_json FROM attempt WHERE run = ? ORDER BY started_count", run_id)
    return tuple(from_json(row["finished_json"], AttemptFinished) for row in rows)
