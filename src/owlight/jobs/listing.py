"""The verb `logbook`: one line a run."""

from __future__ import annotations

from dataclasses import asdict
from pathlib import Path
from typing import Any

from owlight.logbook.read import open_reader, runs


def listing(folder: Path) -> list[dict[str, Any]]:
    """Newest first."""
    with open_reader(folder) as reader:
        return [asdict(header) for header in runs.list_runs(reader)]
