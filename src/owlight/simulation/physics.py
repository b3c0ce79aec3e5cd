"""The optics of one world, as the shared light asks for them."""

from __future__ import annotations

from typing import Protocol

from owlight.simulation import optics
from owlight.simulation.optics import LightSettings
from owlight.simulation.world import World
from owlight.vocabulary.captures import Codes


class Physics(Protocol):
    """Pure: the same arguments give the same bytes."""

    def meter_power_w(self, s: LightSettings, key: int, planned_time_s: float, averaging_s: float) -> float: ...

    def receiver_power_w(self, s: LightSettings, planned_time_s: float) -> float: ...

    def diode_peak_power_w(self, s: LightSettings) -> float: ...

    def damaged_by(self, peak_w: float) -> frozenset[str]: ...

    def photocurrent_a(self, s: LightSettings, key: int, planned_time_s: float) -> float: ...

    def capture_codes(
        self, s: LightSettings, key: int, planned_time_s: float, damaged: frozenset[str]
    ) -> tuple[Codes, ...]: ...


class WorldPhysics:
    """The optics in fields, bound to a world."""

    def __init__(self, world: World) -> None:
        self._world = world

    def meter_power_w(self, s: LightSettings, key: int, planned_time_s: float, averaging_s: float) -> float:
        return optics.meter_power_w(self._world, s, key, planned_time_s, averaging_s)

    def receiver_power_w(self, s: LightSettings, planned_time_s: float) -> float:
        return optics.receiver_power_w(self._world, s, planned_time_s)

    def diode_peak_power_w(self, s: LightSettings) -> float:
        return optics.diode_peak_power_w(self._world, s)

    def damaged_by(self, peak_w: float) -> frozenset[str]:
        return optics.damaged_by(self._world, peak_w)

    def photocurrent_a(self, s: LightSettings, key: int, planned_time_s: float) -> float:
        return optics.photocurrent_a(self._world, s, key, planned_time_s)

    def capture_codes(
        self, s: LightSettings, key: int, planned_time_s: float, damaged: frozenset[str]
    ) -> tuple[Codes, ...]:
        return optics.capture_codes(self._world, s, key, planned_time_s, damaged)
