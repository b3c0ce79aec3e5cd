"""The only place that knows pyvisa. Patterns and their speeds were measured on pyvisa-py 0.8.1.

On a SOCKET: the termination character is off while a block is read, and the block is read by its exact length: the
back end's own block query makes one read per termination character in the data, 13 to 15 times slower. A dropped
connection would be noticed only at the time-out, with a core at full load; `select` and a peek notice it at once.
"""

from __future__ import annotations

import logging
import select
import socket
import time
from contextlib import suppress
from functools import cache
from typing import Any

import numpy as np

from owlight.link.session import Bytes, Session
from owlight.scpi import block_length

_SOCKET_CHUNK_BYTES = 65_536
_MESSAGE_CHUNK_BYTES = 262_144  # HiSLIP only: fastest of 20 KiB to 1 MiB; as a default it would slow short answers
_SLICE_S = 0.1


@cache
def _manager() -> Any:
    """One for the process and never closed: closing it would close everybody's sessions."""
    import pyvisa

    logging.getLogger("pyvisa").setLevel(logging.ERROR)
    return pyvisa.ResourceManager("@py")


def open_visa(resource: str, deadline_s: float) -> Session:
    """Any VISA resource string. A SOCKET opens even where nobody listens, so the link proves it with `*IDN?`."""
    # stated, because the back end turns its default of 0 into about 100 ms on VXI-11
    instrument = _manager().open_resource(
        resource,
        open_timeout=_milliseconds(deadline_s),
        read_termination="\n",
        write_termination="\n",
        timeout=_milliseconds(deadline_s),
    )
    if resource.upper().rstrip().endswith("SOCKET"):
        return SocketSession(instrument)
    return MessageSession(instrument)


def _milliseconds(seconds: float) -> int:
    return max(1, round(seconds * 1000))  # 0 would be "immediately", None "for ever"


class MessageSession:
    """A transport that knows where a message ends: HiSLIP, VXI-11, USB."""

    def __init__(self, instrument: Any) -> None:
        self._instrument = instrument
        for wire in _sockets(instrument):
            _tune(wire)

    def write(self, message: str, deadline_s: float) -> None:
        self._instrument.timeout = _milliseconds(deadline_s)
        self._instrument.write(message)

    def read(self, deadline_s: float) -> str:
        self._instrument.timeout = _milliseconds(deadline_s)
        return str(self._instrument.read()).rstrip("\r\n")

    def query_block(self, message: str, most_bytes: int, terminator_after: bool, deadline_s: float) -> Bytes:
        self._instrument.timeout = _milliseconds(deadline_s)
        data: Bytes = self._instrument.query_binary_values(
            message,
            datatype="B",
            container=np.ndarray,
            chunk_size=_MESSAGE_CHUNK_BYTES,
            expect_termination=terminator_after,
        )
        if data.size > most_bytes:
            raise ValueError(f"a block of {data.size} bytes came, at most {most_bytes} were expected")
        return data

    def abort(self) -> None:
        for wire in _sockets(self._instrument):
            _shut(wire)

    def close(self) -> None:
        session = getattr(self._instrument, "_session", None)
        self._instrument.close()
        # the back end never forgets closed sessions, 2 kB each
        library = self._instrument.visalib
        for store in ("sessions", "_last_status_in_session"):
            getattr(library, store, {}).pop(session, None)


class SocketSession(MessageSession):
    """A raw stream: messages end with a line feed, blocks with their length."""

    def read(self, deadline_s: float) -> str:
        left_s = self._await_bytes(deadline_s)
        self._instrument.timeout = _milliseconds(left_s)
        return str(self._instrument.read()).rstrip("\r\n")

    def query_block(self, message: str, most_bytes: int, terminator_after: bool, deadline_s: float) -> Bytes:
        self.write(message, deadline_s)
        left_s = self._await_bytes(deadline_s)
        self._instrument.timeout = _milliseconds(left_s)
        self._instrument.read_termination = None
        header = self._exactly(2)
        if block_length(header) is None:
            header += self._exactly(int(header[1:2]))
        found = block_length(header)
        if found is None or found[1] > most_bytes:
            raise ValueError(f"the block {header!r} is longer than the {most_bytes} bytes expected")
        data = self._exactly(found[1] + terminator_after)
        if terminator_after and data[-1:] != b"\n":
            raise ValueError(f"the block ends with {data[-1:]!r} instead of a line feed")
        self._instrument.read_termination = "\n"
        return np.frombuffer(data, np.uint8, count=found[1])

    def _exactly(self, count: int) -> bytes:
        return bytes(self._instrument.read_bytes(count, chunk_size=_SOCKET_CHUNK_BYTES)) if count else b""

    def _await_bytes(self, deadline_s: float) -> float:
        """Wait for the first byte; what is left of the deadline."""
        wires = _sockets(self._instrument)
        end_s = time.monotonic() + deadline_s
        while wires:
            left_s = end_s - time.monotonic()
            if left_s <= 0:
                raise TimeoutError("no answer in time")
            if not select.select(wires, [], [], min(left_s, _SLICE_S))[0]:
                continue
            if wires[0].recv(1, socket.MSG_PEEK) == b"":
                raise ConnectionError("the instrument closed the connection")
            return left_s
        return deadline_s


def _sockets(instrument: Any) -> list[socket.socket]:
    """The sockets under a session; none where the back end has no such thing. This reach is private to pyvisa-py."""
    try:
        interface = instrument.visalib.sessions[instrument.session].interface
    except Exception:
        return []
    found = (interface, getattr(interface, "_sync", None), getattr(interface, "_async", None))
    return [wire for wire in found if isinstance(wire, socket.socket)]


def _tune(wire: socket.socket) -> None:
    # the back end leaves Nagle on: write after write then costs 44 ms (measured), and its own setter is broken
    wire.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
    wire.setsockopt(socket.SOL_SOCKET, socket.SO_KEEPALIVE, 1)


def _shut(wire: socket.socket) -> None:
    with suppress(OSError):  # it may be gone already
        wire.shutdown(socket.SHUT_RDWR)
