"""Message exchange with one client: whole messages in, response messages out (IEEE 488.2 chapter 6)."""

from __future__ import annotations

from owlight.simulation.device.bench_time import Cleared
from owlight.simulation.device.errors import DeviceError
from owlight.simulation.device.instrument import Instrument
from owlight.simulation.device.message import split


class Exchange:
    """One client's input buffer and output queue; two clients of an instrument have one each."""

    def __init__(self, instrument: Instrument) -> None:
        self.instrument = instrument
        self._input = ""
        self._cleared = False
        self.unread = False  # a response that the client has not taken yet; MAV

    def write(self, data: bytes, end: bool = False) -> list[bytes]:
        """The response messages to what arrived; `end` is END on the last byte, which a raw socket has not."""
        self._input += data.decode("latin-1")
        messages, self._input = split(self._input)
        if end and self._input:  # END ends a message without NL, and one whose block promised more than it brought
            messages.append(self._input)
            self._input = ""
        with self.instrument.time.lock:
            responses = [self._respond(message) for message in messages]
        return [response for response in responses if response]

    def _respond(self, message: str) -> bytes:
        if self.unread:
            self.unread = False
            self.instrument.status.report(DeviceError(-410))
        try:
            answers = list(self.instrument.execute(message.rstrip("\r"), lambda: self._cleared))
        except Cleared:
            return b""
        encoded = [answer if isinstance(answer, bytes) else answer.encode("latin-1") for answer in answers]
        response = b";".join(encoded) + b"\n" if encoded else b""
        self.instrument.overheard(message, response)
        return response

    def status_byte(self) -> int:
        with self.instrument.time.lock:
            self.instrument.refresh()
            return self.instrument.status.byte(self.unread)

    def clear(self) -> None:
        """Device clear, clause 5.8: buffers emptied and waits ended; settings, status and errors stay."""
        self._cleared = True
        with self.instrument.time.lock:
            self._input = ""
            self.unread = False
            self.instrument.opc_asked = False
            self.instrument.time.lock.notify_all()

    def ready(self) -> None:
        self._cleared = False
