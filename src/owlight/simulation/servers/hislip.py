"""HiSLIP 1.0, synchronised mode (IVI-6.1): one port, a sub-address an instrument, two connections a session.

AsyncServiceRequest and Interrupted are never sent: the client library this was measured with takes either for the
answer to its next status query.
"""

from __future__ import annotations

import itertools
import socket
import struct
import threading
import time
from collections.abc import Mapping
from dataclasses import dataclass

from owlight.simulation.device.exchange import Exchange
from owlight.simulation.device.instrument import Instrument
from owlight.simulation.servers.faults import Delivery, Faults
from owlight.simulation.servers.listening import Listener, receive_exactly

_HEADER = struct.Struct("!2sBBIQ")
INITIALIZE, INITIALIZE_RESPONSE, FATAL_ERROR, ERROR = 0, 1, 2, 3
ASYNC_LOCK, ASYNC_LOCK_RESPONSE, DATA, DATA_END = 4, 5, 6, 7
DEVICE_CLEAR_COMPLETE, DEVICE_CLEAR_ACKNOWLEDGE = 8, 9
REMOTE_LOCAL, REMOTE_LOCAL_RESPONSE, TRIGGER = 10, 11, 12
MAX_MESSAGE_SIZE, MAX_MESSAGE_SIZE_RESPONSE = 15, 16
ASYNC_INITIALIZE, ASYNC_INITIALIZE_RESPONSE, ASYNC_DEVICE_CLEAR = 17, 18, 19
STATUS_QUERY, STATUS_RESPONSE, ASYNC_DEVICE_CLEAR_ACKNOWLEDGE = 21, 22, 23
LOCK_INFO, LOCK_INFO_RESPONSE = 24, 25
_VERSION_1_0 = 0x0100
_LARGEST_MESSAGE = 1 << 20
_LARGEST_PAYLOAD_IN = 64 << 20


@dataclass(frozen=True)
class Message:
    type: int
    control: int
    parameter: int
    payload: bytes


def receive(connection: socket.socket) -> Message | None:
    """None where the peer has closed; ValueError where it does not speak HiSLIP."""
    header = receive_exactly(connection, _HEADER.size)
    if header is None:
        return None
    prologue, kind, control, parameter, length = _HEADER.unpack(header)
    if prologue != b"HS" or length > _LARGEST_PAYLOAD_IN:
        raise ValueError("poorly formed message header")
    payload = receive_exactly(connection, length) if length else b""
    return None if payload is None else Message(kind, control, parameter, payload)


def send(connection: socket.socket, kind: int, control: int = 0, parameter: int = 0, payload: bytes = b"") -> None:
    connection.sendall(_HEADER.pack(b"HS", kind, control, parameter, len(payload)) + payload)


class _Session:
    """One client: its exchange, its limit on message sizes, and whether it is being cleared."""

    def __init__(self, exchange: Exchange, faults: Faults) -> None:
        self.exchange = exchange
        self.faults = faults
        self.largest_message = _LARGEST_MESSAGE
        self.clearing = threading.Event()


class HislipServer:
    """All instruments behind one listener."""

    def __init__(self, instruments: Mapping[str, Instrument], faults: Mapping[str, Faults]) -> None:
        self._instruments = instruments
        self._faults = faults
        self._roles = {f"hislip{number}": role for number, role in enumerate(instruments)}
        self._sessions: dict[int, _Session] = {}
        self._numbers = itertools.count(1)
        self.listener = Listener(self._serve)

    def resource(self, role: str) -> str:
        address = next(address for address, name in self._roles.items() if name == role)
        return f"TCPIP::127.0.0.1::{address},{self.listener.port}::INSTR"

    def _serve(self, connection: socket.socket) -> None:
        try:
            first = receive(connection)
            if first is None:
                return
            if first.type == INITIALIZE:
                self._serve_synchronous(connection, first)
            elif first.type == ASYNC_INITIALIZE and first.parameter in self._sessions:
                self._serve_asynchronous(connection, self._sessions[first.parameter])
            else:
                send(connection, FATAL_ERROR, 3, payload=b"Invalid Initialization sequence")
        except ValueError:
            send(connection, FATAL_ERROR, 1, payload=b"Poorly formed message header")

    # ---- synchronous channel ----

    def _serve_synchronous(self, connection: socket.socket, first: Message) -> None:
        role = self._roles.get(first.payload.decode("latin-1") or "hislip0")
        if role is None:
            send(connection, FATAL_ERROR, 3, payload=b"unknown sub-address")
            return
        number = next(self._numbers) & 0xFFFF
        session = _Session(Exchange(self._instruments[role]), self._faults[role])
        self._sessions[number] = session
        try:
            send(connection, INITIALIZE_RESPONSE, 0, _VERSION_1_0 << 16 | number)
            while message := receive(connection):
                self._synchronous(connection, session, message)
        finally:
            session.exchange.clear()
            del self._sessions[number]

    def _synchronous(self, connection: socket.socket, session: _Session, message: Message) -> None:
        if message.type == DEVICE_CLEAR_COMPLETE:
            session.exchange.clear()
            session.exchange.ready()
            session.clearing.clear()
            send(connection, DEVICE_CLEAR_ACKNOWLEDGE)
        elif message.type in (DATA, DATA_END):
            if not session.clearing.is_set():
                self._data(connection, session, message)
        elif message.type != TRIGGER:
            send(connection, ERROR, 1, payload=b"Unrecognized Message Type")

    def _data(self, connection: socket.socket, session: _Session, message: Message) -> None:
        if message.control & 1:  # RMT was delivered: the last response has been read to its end
            session.exchange.unread = False
        for response in session.exchange.write(message.payload, end=message.type == DATA_END):
            if session.clearing.is_set():
                return
            session.exchange.unread = True
            delivery = session.faults.deliver(response)
            if delivery.wait_s:
                time.sleep(delivery.wait_s)
            if delivery.cut:
                connection.shutdown(socket.SHUT_RDWR)
                return
            _answer(connection, delivery, message.parameter, session.largest_message)

    # ---- asynchronous channel ----

    def _serve_asynchronous(self, connection: socket.socket, session: _Session) -> None:
        send(connection, ASYNC_INITIALIZE_RESPONSE, 0, int.from_bytes(b"OL", "big"))
        while message := receive(connection):
            self._asynchronous(connection, session, message)

    def _asynchronous(self, connection: socket.socket, session: _Session, message: Message) -> None:
        if message.type == MAX_MESSAGE_SIZE:
            asked = int.from_bytes(message.payload, "big")
            session.largest_message = max(min(asked, _LARGEST_MESSAGE), 2 * _HEADER.size)
            send(connection, MAX_MESSAGE_SIZE_RESPONSE, payload=_LARGEST_MESSAGE.to_bytes(8, "big"))
        elif message.type == STATUS_QUERY:
            if message.control & 1:
                session.exchange.unread = False
            send(connection, STATUS_RESPONSE, session.exchange.status_byte())
        elif message.type == ASYNC_DEVICE_CLEAR:
            session.clearing.set()
            session.exchange.clear()
            send(connection, ASYNC_DEVICE_CLEAR_ACKNOWLEDGE)
        elif message.type == ASYNC_LOCK:
            send(connection, ASYNC_LOCK_RESPONSE, 1)
        elif message.type == LOCK_INFO:
            send(connection, LOCK_INFO_RESPONSE)
        elif message.type == REMOTE_LOCAL:
            send(connection, REMOTE_LOCAL_RESPONSE)
        else:
            send(connection, ERROR, 1, payload=b"Unrecognized Message Type")


def _answer(connection: socket.socket, delivery: Delivery, message_id: int, largest: int) -> None:
    """The response under the client's message id, in parts that it can take; an unfinished one has no DataEnd."""
    room = largest - _HEADER.size
    view = memoryview(delivery.data)
    while view:
        part, view = view[:room], view[room:]
        kind = DATA_END if delivery.whole and not view else DATA
        header = _HEADER.pack(b"HS", kind, 0, message_id, len(part))
        if len(part) < 4096:
            connection.sendall(header + bytes(part))
        else:
            connection.sendall(header)
            connection.sendall(part)
