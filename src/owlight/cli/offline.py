"""One capture from anywhere, no bench."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Annotated

import typer

from owlight.cli.options import Json


# as many parameters as the command has options
def demodulate(
    file: Annotated[Path, typer.Argument(metavar="FILE", help="Capture: .npz with `codes`, lanes x samples, integer.")],
    symbol_rate: Annotated[str, typer.Option(metavar="RATE", help='For example "32 GBd".')],
    sample_rate: Annotated[str, typer.Option(metavar="RATE", help='For example "80 GS/s".')],
    modulation: Annotated[str, typer.Option(metavar="FORMAT", help="Format of the symbols.")] = "QPSK",
    polarisations: Annotated[int, typer.Option(min=1, max=2, help="1 or 2.")] = 2,
    rolloff: Annotated[float, typer.Option(min=0.0, max=1.0, help="Roll-off of the root-raised-cosine pulse.")] = 0.1,
    reference: Annotated[
        str, typer.Option(metavar="LABELS", help="Labels as .npy (polarisations x length), or a pattern's order.")
    ] = "15",
    as_json: Json = False,
) -> None:
    """Demodulate one capture and count its errors."""
    from owlight.cli.result import print_demodulation
    from owlight.jobs.demodulate import FileSignal, demodulate_file

    signal = FileSignal(symbol_rate, sample_rate, modulation, polarisations, rolloff, reference)
    found = demodulate_file(file, signal)
    if as_json:
        print(json.dumps(found))
    else:
        print_demodulation(found)
    raise typer.Exit(0 if found["status"] == "locked" else 1)
