"""All commands in one place; each has a file of its own."""

from __future__ import annotations

from collections.abc import Callable

import typer

from owlight import __version__
from owlight.cli import bench, curve_commands, files, measure, offline

app = typer.Typer(
    name="owlight",
    help="Measure how little light a coherent receiver needs, and keep every reason to believe the number.",
    no_args_is_help=True,
    rich_markup_mode=None,
    add_completion=False,
    pretty_exceptions_enable=False,
)


def _version(wanted: bool) -> None:
    if wanted:
        typer.echo(f"owlight {__version__}")
        raise typer.Exit


@app.callback()
def _main(
    version: bool = typer.Option(False, "--version", callback=_version, is_eager=True, help="Print the version."),
) -> None:
    pass


_COMMANDS: tuple[Callable[..., None], ...] = (
    measure.demo,
    files.forecast,
    measure.run,
    curve_commands.show,
    curve_commands.report,
    measure.reproduce,
    curve_commands.logbook,
    bench.identify,
    bench.safe,
    bench.simulate,
    offline.demodulate,
)
for command in _COMMANDS:
    app.command()(command)
