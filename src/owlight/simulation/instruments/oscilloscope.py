"""The oscilloscope: arm, wait, fetch; the record stays until the next one, and is handed out as often as asked."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from owlight.simulation.device.entry import Call
from owlight.simulation.device.errors import DeviceError
from owlight.simulation.device.instrument import Instrument, Value
from owlight.simulation.device.status import MEASURING
from owlight.simulation.light import SharedLight

_LEVELS = 256  # the converter's own codes; 16-bit answers carry them in the upper byte


class Oscilloscope:
    """Volts are codes times the range over 256 (65536 for 16-bit answers); lanes in the order of the channels."""

    def __init__(self, instrument: Instrument, light: SharedLight) -> None:
        self.instrument = instrument
        self.light = light
        self.readings: dict[str, Callable[[Call], Value]] = {
            "lane": self._lane,
            "increment": self._increment,
            "busy": lambda _: int(self._busy()),
        }
        self.actions: dict[str, Callable[[], None]] = {"arm": self._arm, "abort": self._abort}
        self.reset(power_up=True)

    def reset(self, power_up: bool) -> None:
        """The record does not survive *RST."""
        self._lanes: tuple[bytes, ...] = ()
        self._new: set[int] = set()
        self._due_s = 0.0

    def _busy(self) -> bool:
        return self._due_s > self.instrument.time.now_s()

    def _arm(self) -> None:
        if self._busy():
            raise DeviceError(-213)
        try:
            self._lanes, self._new = self.light.record(), {1, 2, 3, 4}
        except ValueError as error:  # the optics know no such light, or no record so slow
            raise DeviceError(-221, str(error)) from None
        action = self.instrument.file.action["arm"]
        self._due_s = self.instrument.time.now_s() + action.takes_s
        self.instrument.begin(action.takes_s, MEASURING, action.opc_waits)

    def _abort(self) -> None:
        self._due_s = 0.0
        self.instrument.end_operations(MEASURING)

    def _lane(self, call: Call) -> bytes:
        """Each lane of a record is new once."""
        self.instrument.time.wait_until(self._due_s, call.cleared)
        stale = self.instrument.file.record.stale_is_refused and call.suffix not in self._new
        if not self._lanes or stale:
            raise DeviceError(-230, "no new record")
        self._new.discard(call.suffix)
        return self._as_sent(self._lanes[call.suffix - 1])

    def _bits(self) -> int:
        return int(self.instrument.value("data_bits"))

    def _as_sent(self, lane: bytes) -> bytes:
        if self._bits() == 8:
            return lane
        given = self.instrument.file.record.byte_order
        order = str(self.instrument.value("byte_order")) if self.instrument.has("byte_order") else given
        wide = np.frombuffer(lane, np.int8).astype(np.int16) * np.int16(_LEVELS)
        return wide.astype(">i2" if order == "big" else "<i2").tobytes()

    def _increment(self, call: Call) -> float:
        codes = float(_LEVELS ** (self._bits() // 8))
        return float(self.instrument.value("range", call.suffix)) / codes
