"""The simulated bench: SCPI instruments on real sockets in front of one optical model, in a process of its own."""

from owlight.simulation.control import Control, SteppedClock
from owlight.simulation.running import RunningSimulation, start

__all__ = ["Control", "RunningSimulation", "SteppedClock", "start"]
