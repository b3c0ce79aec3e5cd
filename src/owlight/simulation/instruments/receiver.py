"""The receiver's own readings: photocurrent and damage."""

from __future__ import annotations

from collections.abc import Callable

from owlight.simulation.device.entry import Call
from owlight.simulation.device.instrument import Value
from owlight.simulation.light import SharedLight


class Receiver:
    def __init__(self, light: SharedLight) -> None:
        self.light = light
        self.readings: dict[str, Callable[[Call], Value]] = {
            "photocurrent": lambda _: self.light.photocurrent_a(),
            "damaged": lambda _: self._damaged(),
        }
        self.actions: dict[str, Callable[[], None]] = {}

    def _damaged(self) -> int:
        self.light.catch_up()
        return len(self.light.damaged)

    def reset(self, power_up: bool) -> None:
        """Neither *RST nor the mains switch mends a photodiode."""
