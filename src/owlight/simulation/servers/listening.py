"""A listener on a free loopback port that gives each connection a thread."""

from __future__ import annotations

import contextlib
import socket
import threading
from collections.abc import Callable

_BACKLOG = 128  # a short one makes an immediate reopen wait a second for the next SYN


class Listener:
    """`serve` is called in a thread for each connection; the connection is closed when it returns."""

    def __init__(self, serve: Callable[[socket.socket], None]) -> None:
        self._serve = serve
        self._socket = socket.create_server(("127.0.0.1", 0), backlog=_BACKLOG)
        self.port: int = self._socket.getsockname()[1]
        self._open: set[socket.socket] = set()
        self._lock = threading.Lock()
        threading.Thread(target=self._accept, daemon=True, name=f"listener {self.port}").start()

    @property
    def open_connections(self) -> int:
        with self._lock:
            return len(self._open)

    def _accept(self) -> None:
        while True:
            try:
                connection, _ = self._socket.accept()
            except OSError:  # closed
                return
            # an answer is one send; with Nagle's algorithm it could still wait 40 ms for an acknowledgement
            connection.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
            with self._lock:
                self._open.add(connection)
            threading.Thread(target=self._run, args=(connection,), daemon=True).start()

    def _run(self, connection: socket.socket) -> None:
        try:
            with contextlib.suppress(OSError):
                self._serve(connection)
        finally:
            with self._lock:
                self._open.discard(connection)
            connection.close()

    def close(self) -> None:
        with contextlib.suppress(OSError):  # only a shutdown wakes the thread that accepts, and not on every system
            self._socket.shutdown(socket.SHUT_RDWR)
        self._socket.close()


def receive_exactly(connection: socket.socket, count: int) -> bytes | None:
    """None where the peer has closed."""
    buffer = bytearray(count)
    view = memoryview(buffer)
    while view:
        received = connection.recv_into(view)
        if received == 0:
            return None
        view = view[received:]
    return bytes(buffer)
