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
            "record": self._record,
            "lane": self._lane,
            "increment": self._increment,
            "busy": lambda _: int(self._busy()),
        }
        self.actions: dict[str, Callable[[], None]] = {"arm": self._arm, "abort": self._abort}
        self.reset()

    def reset(self) -> None:
        """The record does not survive *RST."""
        self._lanes: tuple[bytes, ...] = ()
        self._new: set[int] = set()
        self._due_s = 0.0

    def _busy(self) -> bool:
        return self._due_s > self.instrument.time.now_s()

    def _arm(self) -> None:
        if self._busy():
            raise DeviceError(-213)
        self._lanes, self._new = self.light.record(), {0, 1, 2, 3}
        action = self.instrument.file.action["arm"]
        self._due_s = self.instrument.time.now_s() + action.takes_s
        self.instrument.begin(action.takes_s, MEASURING, action.opc_waits)

    def _abort(self) -> None:
        self._due_s = 0.0
        self.instrument.end_operations(MEASURING)

    def _settled_lanes(self, call: Call, wanted: range) -> tuple[bytes, ...]:
        """The lanes asked for; each is new once."""
        self.instrument.time.wait_until(self._due_s, call.cleared)
        stale = self.instrument.file.record.stale_is_refused and not self._new.issuperset(wanted)
        if not self._lanes or stale:
            raise DeviceError(-230, "no new record")
        self._new -= set(wanted)
        return tuple(self._lanes[lane] for lane in wanted)

    def _record(self, call: Call) -> bytes:
        return b"".join(self._as_sent(lane) for lane in self._settled_lanes(call, range(4)))

    def _lane(self, call: Call) -> bytes:
        return self._as_sent(self._settled_lanes(call, range(call.suffix - 1, call.suffix))[0])

    def _bits(self) -> int:
        own = self.instrument.file.record.bits
        return int(self.instrument.value("data_bits")) if self.instrument.has("data_bits") else own

    def _as_sent(self, lane: bytes) -> bytes:
        if self._bits() == 8:
            return lane
        given = self.instrument.file.record.byte_order
        order = str(self.instrument.value("byte_order")) if self.instrument.has("byte_order") else given
        wide = np.frombuffer(lane, np.int8).astype(np.int16) * np.int16(_LEVELS)
        return wide.astype(">i2" if order == "big" else "<i2").tobytes()

    def _increment(self, call: Call) -> float:
        range_v = float(self.instrument.value("range", call.suffix))
        return range_v / _LEVELS ** (self._bits() // 8)
