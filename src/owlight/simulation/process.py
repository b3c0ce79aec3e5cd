"""The process of the simulated bench: reads the files, serves every role, ends when nobody needs it."""

from __future__ import annotations

import argparse
import json
import os
import signal
import sys
import threading
import time
from collections.abc import Mapping
from dataclasses import dataclass
from functools import partial
from pathlib import Path

from owlight import shipped
from owlight.errors import InputError, OwlightError, Problem
from owlight.simulation.device.bench_time import BenchTime
from owlight.simulation.device.instrument import Instrument
from owlight.simulation.device.model import InstrumentFile, read_instrument
from owlight.simulation.instruments.build import build
from owlight.simulation.light import SharedLight
from owlight.simulation.physics import WorldPhysics
from owlight.simulation.servers.control import ControlServer
from owlight.simulation.servers.faults import Faults
from owlight.simulation.servers.hislip import HislipServer
from owlight.simulation.servers.raw_socket import RawSocketServer
from owlight.simulation.world import read_world
from owlight.vocabulary.terms import ROLES

_GRACE_S = 5.0  # a guard may still open links after its runner died
_LOOK_S = 0.1
_LONGEST_SHOWN = 120


@dataclass(frozen=True)
class Served:
    """Everything that listens."""

    hislip: HislipServer
    sockets: Mapping[str, RawSocketServer]
    control: ControlServer

    def announcement(self) -> dict[str, object]:
        roles = {
            role: {"hislip": self.hislip.resource(role), "socket": server.resource}
            for role, server in self.sockets.items()
        }
        return {"roles": roles, "control": self.control.listener.port}

    @property
    def open_sessions(self) -> int:
        listeners = [self.hislip.listener, *(server.listener for server in self.sockets.values())]
        return sum(listener.open_connections for listener in listeners)


def serve(instruments: Mapping[str, Instrument], light: SharedLight) -> Served:
    """Listen for every role on both transports."""
    faults = {role: Faults() for role in instruments}
    return Served(
        HislipServer(instruments, faults),
        {role: RawSocketServer(instrument, faults[role]) for role, instrument in instruments.items()},
        ControlServer(light, instruments, faults),
    )


def read_files(names: Mapping[str, str], near: Path) -> dict[str, InstrumentFile]:
    """The instrument file of every role; InputError with all problems of all of them."""
    files: dict[str, InstrumentFile] = {}
    problems: list[Problem] = []
    for role, name in names.items():
        path = shipped.find("simulated_instruments", name, near)
        document = read_instrument(path.read_text(encoding="utf-8"), str(path))
        problems += document.problems
        if document.value is not None:
            files[role] = document.value
    if problems:
        raise InputError("The simulated bench was not started, because its files have mistakes:", tuple(problems))
    return files


def bench(world_path: Path, stepped: bool, log: bool = False) -> Served:
    """The world of the file, served; InputError if it or an instrument's file is wrong."""
    document = read_world(world_path.read_text(encoding="utf-8"), str(world_path))
    if document.problems or document.value is None:
        raise InputError("The simulated bench was not started, because its world has mistakes:", document.problems)
    world = document.value
    files = read_files({role: world.instruments[role] for role in ROLES}, world_path)
    instruments, light = build(files, world.serial_numbers, WorldPhysics(world), BenchTime(stepped))
    if log:
        for instrument in instruments.values():
            instrument.overheard = partial(_log, instrument.role)
    return serve(instruments, light)


def _log(role: str, message: str, response: bytes) -> None:
    shown = response if len(response) <= _LONGEST_SHOWN else response[:_LONGEST_SHOWN] + b"..."
    print(f"{role} < {message}", f"{role} > {shown.decode('latin-1')!r}" if response else "", file=sys.stderr)


def main(arguments: list[str]) -> int:
    """Serve until nobody needs it; the exit status is that of the error's class."""
    asked = _options().parse_args(arguments)
    try:
        served = bench(asked.world, asked.stepped, asked.log)
    except OSError as error:
        print(f"The world file cannot be read: {error}.", file=sys.stderr)
        return InputError.exit_status
    except OwlightError as error:
        print(error, file=sys.stderr)
        return error.exit_status
    print(json.dumps(served.announcement()), flush=True)
    _serve_until_unneeded(served, asked.grace)
    return 0


def _options() -> argparse.ArgumentParser:
    options = argparse.ArgumentParser("python -m owlight.simulation", description="Serve the bench of a world file.")
    options.add_argument("world", type=Path, help="the world file")
    mode = options.add_mutually_exclusive_group()
    mode.add_argument("--stepped", action="store_true", help="time moves when it is told to, through the control port")
    mode.add_argument("--wall", dest="stepped", action="store_false", help="time passes on the wall (default)")
    options.add_argument("--log", action="store_true", help="every message and answer on standard error")
    words = "seconds to stay when the starter has gone and no session is open"
    options.add_argument("--grace", type=float, default=_GRACE_S, help=words)
    return options


def _serve_until_unneeded(served: Served, grace_s: float) -> None:
    """Until SIGTERM, or until the starter has closed our standard input and no session was open for a while."""
    stop, orphaned = threading.Event(), threading.Event()
    for number in (signal.SIGTERM, signal.SIGINT):
        signal.signal(number, lambda *_: stop.set())
    threading.Thread(target=_watch_standard_input, args=(orphaned,), daemon=True).start()
    needed_s = time.monotonic()
    while not stop.wait(_LOOK_S):
        if orphaned.is_set():
            served.control.let_time_pass()  # a guard waits on the wall, not through the control port
        if not orphaned.is_set() or served.open_sessions:
            needed_s = time.monotonic()
        elif time.monotonic() - needed_s > grace_s:
            return


def _watch_standard_input(orphaned: threading.Event) -> None:
    while os.read(sys.stdin.fileno(), 4096):
        pass
    orphaned.set()
