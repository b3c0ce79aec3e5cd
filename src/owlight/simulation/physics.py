"""The optics of one world, as the shared light asks for them."""

from __future__ import annotations

from typing import Protocol

import numpy as np
import numpy.typing as npt

from owlight.simulation.stand_in import LightSettings, StandIn

__all__ = ["LightSettings", "Physics", "StandIn"]


class Physics(Protocol):
    """Pure: the same arguments give the same bytes."""

    def meter_power_w(self, s: LightSettings, key: int, planned_time_s: float, averaging_s: float) -> float: ...

    def receiver_power_w(self, s: LightSettings, planned_time_s: float) -> float: ...

    def diode_peak_power_w(self, s: LightSettings) -> float: ...

    def damaged_by(self, peak_w: float) -> frozenset[str]: ...

    def photocurrent_a(self, s: LightSettings, key: int, planned_time_s: float) -> float: ...

    def capture_codes(
        self, s: LightSettings, key: int, planned_time_s: float, damaged: frozenset[str]
    ) -> tuple[npt.NDArray[np.int8], ...]: ...
