"""The IEEE 488.2 status model with SCPI's two register sets and error queue.

Bit weights: IEEE 488.2 clause 11 and SCPI-99 volume 1 chapter 9.
"""

from __future__ import annotations

from collections import deque

from owlight.simulation.device import errors

EAV, QUES, MAV, ESB, MSS, OPER = 4, 8, 16, 32, 64, 128
CALIBRATING, SETTLING, MEASURING, WAITING_FOR_TRIGGER = 1, 2, 16, 32
COMMAND_WARNING = 1 << 14
HARDWARE_FAULT = 1 << 9  # QUEStionable bits 9 to 12 are the designer's
_HIGHEST = 0x7FFF  # bit 15 is never used, so that the answer is never negative


class Register:
    """Condition, transition filters, event, enable. After STATus:PRESet only rising bits are latched."""

    def __init__(self) -> None:
        self._condition = 0
        self.event = 0
        self.preset()

    def preset(self) -> None:
        self.enable = 0
        self.rising = _HIGHEST
        self.falling = 0

    @property
    def condition(self) -> int:
        return self._condition

    @condition.setter
    def condition(self, value: int) -> None:
        rose, fell = value & ~self._condition, self._condition & ~value
        self.event |= (rose & self.rising) | (fell & self.falling)
        self._condition = value & _HIGHEST

    def change(self, bit: int, on: bool) -> None:
        self.condition = self._condition | bit if on else self._condition & ~bit

    def flash(self, bit: int) -> None:
        """A condition that came and went."""
        self.change(bit, True)
        self.change(bit, False)

    def read_event(self) -> int:
        value, self.event = self.event, 0
        return value

    @property
    def summary(self) -> bool:
        return bool(self.event & self.enable)


class ErrorQueue:
    """First in, first out. When full the newest entry is replaced by -350, older ones stay (SCPI-99 21.8)."""

    def __init__(self, size: int = 16) -> None:
        self._size = size
        self._entries: deque[str] = deque()

    def __len__(self) -> int:
        return len(self._entries)

    def push(self, number: int, detail: str = "") -> None:
        if len(self._entries) < self._size:
            self._entries.append(errors.entry(number, detail))
        else:
            self._entries[-1] = errors.entry(-350)

    def pop(self) -> str:
        return self._entries.popleft() if self._entries else errors.entry(0)

    def pop_all(self) -> str:
        entries, self._entries = ",".join(self._entries), deque()
        return entries or errors.entry(0)

    def clear(self) -> None:
        self._entries.clear()


class Status:
    """All of one instrument's status; the enables are 0 and PON stands after power-up."""

    def __init__(self, queue_size: int = 16) -> None:
        self.standard_event = errors.PON
        self.standard_enable = 0
        self.service_enable = 0
        self.operation = Register()
        self.questionable = Register()
        self.queue = ErrorQueue(queue_size)

    def report(self, error: errors.DeviceError) -> None:
        self.standard_event |= errors.event_bit(error.number)
        self.queue.push(error.number, error.detail)

    def read_standard_event(self) -> int:
        value, self.standard_event = self.standard_event, 0
        return value

    def clear(self) -> None:
        """*CLS, clause 10.3: events and queue go, enables and transition filters stay."""
        self.standard_event = 0
        self.operation.event = 0
        self.questionable.event = 0
        self.queue.clear()

    def preset(self) -> None:
        """STATus:PRESet touches only the SCPI registers."""
        self.operation.preset()
        self.questionable.preset()

    def set_service_enable(self, value: int) -> None:
        self.service_enable = value & 0xFF & ~MSS  # clause 11.3.2: bit 6 cannot be enabled

    def byte(self, message_available: bool) -> int:
        value = EAV * bool(len(self.queue)) | QUES * self.questionable.summary | OPER * self.operation.summary
        value |= MAV * message_available | ESB * bool(self.standard_event & self.standard_enable)
        return value | MSS * bool(value & self.service_enable)
