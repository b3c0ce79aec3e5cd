"""Arguments that several commands share, worded once."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

Folder = Annotated[Path, typer.Option("--logbook", metavar="FOLDER", help="Folder of the logbook.")]
BenchFile = Annotated[str, typer.Option("--bench", metavar="BENCH", help="Bench file.")]
SequenceFile = Annotated[str, typer.Argument(metavar="SEQUENCE", help="Sequence file.")]
Run = Annotated[str, typer.Argument(metavar="RUN", help='Run id, the beginning of one, or "last".')]
Json = Annotated[bool, typer.Option("--json", help="Print one JSON object for other programs.")]
Seed = Annotated[int | None, typer.Option("--seed", metavar="SEED", help="Seed instead of the sequence's own.")]

LOGBOOK = Path("owlight-logbook")
