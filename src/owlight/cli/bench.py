"""Commands that talk to a bench without measuring: identify, safe, simulate."""

from __future__ import annotations

import json

import typer

from owlight.cli.options import BenchFile, Json


def identify(bench: BenchFile, as_json: Json = False) -> None:
    """Ask every instrument of the bench who it is; no setting is touched."""
    from owlight.jobs.identify import identify as ask

    found = ask(bench)
    if as_json:
        print(json.dumps(found))
    else:
        _print_mark(found["simulated"])
        for answer in found["instruments"]:
            print(f"{answer['role']:17} {answer['resource']}")
            print(f"{'':17} {answer['answer']}: {answer['words']}")
    raise typer.Exit(0 if all(answer["as_planned"] for answer in found["instruments"]) else 3)


def _print_mark(simulated: bool, words: str = "") -> None:
    if simulated:
        print("SIMULATED, no hardware" + (f". {words}" if words else ""))


def safe(bench: BenchFile, as_json: Json = False) -> None:
    """Make the bench safe now: attenuation up, sources off, each confirmed or said to be unconfirmed."""
    from owlight.cli.result import print_safe_state
    from owlight.jobs.safe import make_safe

    found = make_safe(bench)
    if as_json:
        print(json.dumps(found))
    else:
        _print_mark(found["simulated"], found["words"])
        print_safe_state(found)
    raise typer.Exit(0 if found["confirmed"] else 3)


def simulate(bench: str = typer.Argument(metavar="BENCH", help="Simulated bench file."), as_json: Json = False) -> None:
    """Serve the simulated bench on this machine's loopback, at wall-clock speed, until stopped."""
    from owlight.jobs.simulate import serve

    def say(resources: dict[str, dict[str, str]]) -> None:
        if as_json:
            print(json.dumps(resources), flush=True)
            return
        print("Simulated instruments, loopback only; Ctrl-C stops them.")
        for role, transports in resources.items():
            print(f"{role:17} {transports['hislip']}\n{'':17} {transports['socket']}", flush=True)

    serve(bench, say)
