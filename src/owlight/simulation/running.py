"""Start the simulated bench as a process of its own, and end it."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import tempfile
from pathlib import Path

from owlight import shipped
from owlight.clock import Clock, WallClock
from owlight.errors import BenchError, InputError
from owlight.simulation.control import Control, SteppedClock

_END_S = 5.0


class RunningSimulation:
    """A bench that serves; `stop` ends its process, and so does closing its standard input."""

    def __init__(self, process: subprocess.Popen[bytes], announcement: dict[str, object], stepped: bool) -> None:
        self._process = process
        self.resources: dict[str, dict[str, str]] = announcement["roles"]  # type: ignore[assignment]
        self.control = Control(int(str(announcement["control"])))
        self.clock: Clock = SteppedClock(self.control) if stepped else WallClock()

    @property
    def alive(self) -> bool:
        return self._process.poll() is None

    def stop(self) -> None:
        """Ask, wait, then insist."""
        self.control.close()
        self._process.terminate()
        try:
            self._process.wait(_END_S)
        except subprocess.TimeoutExpired:
            self._process.kill()
            self._process.wait()
        for pipe in (self._process.stdin, self._process.stdout):
            if pipe is not None:
                pipe.close()


def start(world_path: Path, stepped: bool = True) -> RunningSimulation:
    """InputError with the words of the bench if its files are wrong."""
    source = str(Path(shipped.__file__).resolve().parents[1])
    surroundings = dict(os.environ)
    surroundings["PYTHONPATH"] = os.pathsep.join(filter(None, (source, surroundings.get("PYTHONPATH"))))
    mode = "--stepped" if stepped else "--wall"
    with tempfile.TemporaryFile() as words:  # a pipe that nobody reads would stop the child one day
        process = subprocess.Popen(
            [sys.executable, "-m", "owlight.simulation", str(world_path), mode],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=words,
            env=surroundings,
            # Ctrl-C is for the runner, which needs the bench to make it safe
            start_new_session=True,
            creationflags=getattr(subprocess, "CREATE_NEW_PROCESS_GROUP", 0),
        )
        assert process.stdout is not None
        line = process.stdout.readline()
        if not line:
            kind = InputError if process.wait() == InputError.exit_status else BenchError
            words.seek(0)
            raise kind(words.read().decode(errors="replace").strip() or "The simulated bench did not start.")
    return RunningSimulation(process, json.loads(line), stepped)
