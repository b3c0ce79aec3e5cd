"""The verb `simulate`: serve a bench for other programs, at wall-clock speed, until stopped."""

from __future__ import annotations

import signal
import threading
from collections.abc import Callable

from owlight import simulation
from owlight.jobs.resolve import resolve, world_path


def serve(bench_name: str, say: Callable[[dict[str, dict[str, str]]], None]) -> None:
    """Returns after Ctrl-C or SIGTERM."""
    resolved = resolve(None, bench_name, bench_argument="BENCH")
    running = simulation.start(world_path(bench_name, resolved.bench), stepped=False)
    stopped = threading.Event()
    for number in (signal.SIGINT, signal.SIGTERM):
        signal.signal(number, lambda *_: stopped.set())
    try:
        say(running.resources)
        while not stopped.wait(0.2) and running.alive:
            pass
    finally:
        running.stop()
