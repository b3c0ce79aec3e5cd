"""The power meter: windows, zero, and a responsivity that depends on the wavelength it is told."""

from __future__ import annotations

import math
from collections.abc import Callable

from owlight.simulation.device.entry import Call
from owlight.simulation.device.errors import DeviceError
from owlight.simulation.device.instrument import Instrument, Value
from owlight.simulation.device.status import CALIBRATING, MEASURING
from owlight.simulation.light import SharedLight


class PowerMeter:
    """`read` takes a whole new window, `moving` the window that ends now, `fetch` the last result, old or not."""

    def __init__(self, instrument: Instrument, light: SharedLight) -> None:
        self.instrument = instrument
        self.light = light
        self.readings: dict[str, Callable[[Call], Value]] = {
            "read": self._read,
            "fetch": self._fetch,
            "moving": lambda _: self._window_w(),
        }
        self.actions: dict[str, Callable[[], None]] = {
            "initiate": self._initiate,
            "abort": self._abort,
            "zero": self._zero,
        }
        self.reset(power_up=True)

    def reset(self, power_up: bool) -> None:
        """A zero outlives *RST, as a calibration does."""
        if power_up:
            self._zero_w = 0.0
        self._result_w: float | None = None
        self._due_s: float | None = None

    def _averaging_s(self) -> float:
        return float(self.instrument.value("averaging_time"))

    def _window_w(self) -> float:
        off_nm = abs(float(self.instrument.value("wavelength")) - self.light.now().signal_wavelength_nm)
        loss_db = self.instrument.file.responsivity_slope * off_nm
        seen_w = self.light.meter_power_w(self._averaging_s())
        return seen_w * math.pow(10.0, -loss_db / 10.0) - self._zero_w

    def _initiate(self) -> None:
        self._finish()
        if self._due_s is not None:
            raise DeviceError(-213)
        self._due_s = self.instrument.time.now_s() + self._averaging_s()
        self.instrument.begin(self._averaging_s(), MEASURING)

    def _abort(self) -> None:
        self._due_s = None
        self.instrument.end_operations(MEASURING)

    def _finish(self) -> None:
        if self._due_s is not None and self._due_s <= self.instrument.time.now_s():
            self._result_w, self._due_s = self._window_w(), None

    def _fetch(self, call: Call) -> float:
        if self._due_s is not None:
            self.instrument.time.wait_until(self._due_s, call.cleared)
            self._finish()
        if self._result_w is None:
            raise DeviceError(-230, "nothing was measured")
        return self._result_w

    def _read(self, call: Call) -> float:
        self._abort()
        self._initiate()
        return self._fetch(call)

    def _zero(self) -> None:
        """Whatever is seen becomes zero; with light on that is a wrong zero."""
        self._zero_w += self._window_w()
        self.instrument.begin(self.instrument.file.action["zero"].takes_s, CALIBRATING)
