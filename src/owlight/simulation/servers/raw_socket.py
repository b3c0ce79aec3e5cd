"""SCPI over a bare TCP stream: messages end with NL, answers too; no END, no status byte, no device clear."""

from __future__ import annotations

import socket
import time

from owlight.simulation.device.exchange import Exchange
from owlight.simulation.device.instrument import Instrument
from owlight.simulation.servers.faults import Faults
from owlight.simulation.servers.listening import Listener

_CHUNK = 65536


class RawSocketServer:
    """One port, one instrument."""

    def __init__(self, instrument: Instrument, faults: Faults) -> None:
        self._instrument = instrument
        self._faults = faults
        self.listener = Listener(self._serve)
        self.resource = f"TCPIP::127.0.0.1::{self.listener.port}::SOCKET"

    def _serve(self, connection: socket.socket) -> None:
        exchange = Exchange(self._instrument)
        while data := connection.recv(_CHUNK):
            for response in exchange.write(data):
                delivery = self._faults.deliver(response)
                if delivery.wait_s:
                    time.sleep(delivery.wait_s)
                if delivery.cut:
                    return
                connection.sendall(delivery.data)
