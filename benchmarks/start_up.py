"""How soon the command line answers, beside the bare interpreter and the bare library that reads the arguments.

python benchmarks/start_up.py. The commands take turns, so that a machine that gets busy slows all of them; what a
quarter of the turns beat is compared, since other work only ever slows. Goal: `owlight --help` under 200 ms.
"""

from __future__ import annotations

import os
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

TURNS = 20
GOAL_S = 0.2
CHECKOUT = Path(__file__).resolve().parents[1]
INTERPRETER, PARSER, HELP = "python -c pass", "python -c 'import typer'", "owlight --help"
COMMANDS = {
    INTERPRETER: ["-c", "pass"],
    PARSER: ["-c", "import typer"],
    "owlight --version": ["-m", "owlight", "--version"],
    HELP: ["-m", "owlight", "--help"],
    "owlight demo --help": ["-m", "owlight", "demo", "--help"],
    "owlight forecast": ["-m", "owlight", "forecast", "qpsk_sensitivity", "--bench", "bench"],
}


def seconds(words: list[str], folder: str) -> float:
    surroundings = {**os.environ, "PYTHONPATH": str(CHECKOUT / "src")}
    began = time.perf_counter()
    subprocess.run([sys.executable, *words], cwd=folder, env=surroundings, stdout=subprocess.DEVNULL, check=True)
    return time.perf_counter() - began


def measure() -> dict[str, float]:
    times: dict[str, list[float]] = {name: [] for name in COMMANDS}
    with tempfile.TemporaryDirectory() as folder:
        for turn in range(TURNS + 1):
            for name, words in COMMANDS.items():
                took_s = seconds(words, folder)
                if turn:  # the first turn writes the compiled modules
                    times[name].append(took_s)
    return {name: statistics.quantiles(each, n=4)[0] for name, each in times.items()}


def main() -> int:
    found = measure()
    print(f"{TURNS} turns, lower quartiles")
    print(f"{'':26} {'ms':>6}  over interpreter  over parser")
    for name, took_s in found.items():
        print(f"{name:26} {1e3 * took_s:6.0f}  {took_s / found[INTERPRETER]:16.1f}  {took_s / found[PARSER]:11.2f}")
    print(f"goal of {HELP}: {1e3 * GOAL_S:.0f} ms")
    return 0 if found[HELP] < GOAL_S else 1


if __name__ == "__main__":
    sys.exit(main())
