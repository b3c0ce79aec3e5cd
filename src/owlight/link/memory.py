"""A link without a wire: program messages are answered by a function in this process."""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np

from owlight.link.session import Bytes, Opener, Session
from owlight.scpi import block_length

Answer = Callable[[bytes], bytes]
"""One program message without terminator -> its response message, empty if there is none."""


def memory_opener(instruments: Mapping[str, Answer]) -> Opener:
    """An opener for `Link` that reaches these resources and no others."""

    def opened(resource: str, deadline_s: float) -> Session:
        if resource not in instruments:
            raise ConnectionRefusedError(f"nobody answers at {resource}")
        return _MemorySession(instruments[resource])

    return opened


class _MemorySession:
    def __init__(self, answer: Answer) -> None:
        self._answer = answer
        self._waiting = b""

    def write(self, message: str, deadline_s: float) -> None:
        self._waiting = self._answer(message.encode("ascii"))

    def read(self, deadline_s: float) -> str:
        answered, self._waiting = self._waiting, b""
        if not answered:
            raise TimeoutError("no answer in time")
        return answered.decode("ascii").rstrip("\n")

    def query_block(self, message: str, most_bytes: int, terminator_after: bool, deadline_s: float) -> Bytes:
        self.write(message, deadline_s)
        answered, self._waiting = self._waiting, b""
        found = block_length(answered)
        if found is None or found[1] > most_bytes:
            raise ValueError(f"no block of at most {most_bytes} bytes")
        header, length = found
        data = answered[header : header + length]
        if len(data) < length:
            raise TimeoutError(f"{len(data)} of {length} bytes came")
        return np.frombuffer(data, np.uint8)

    def abort(self) -> None:
        """Nothing here ever waits."""

    def close(self) -> None:
        self._waiting = b""
