"""What a link needs of a connection. Only the link's own thread calls it, but for `abort`."""

from __future__ import annotations

from collections.abc import Callable
from typing import Protocol

import numpy as np
import numpy.typing as npt

Bytes = npt.NDArray[np.uint8]


class Session(Protocol):
    """Every method may raise anything; after the first exception only `abort` and `close` are called."""

    def write(self, message: str, deadline_s: float) -> None: ...

    def read(self, deadline_s: float) -> str:
        """One response message, without its terminator."""
        ...

    def query_block(self, message: str, most_bytes: int, terminator_after: bool, deadline_s: float) -> Bytes:
        """One definite length block; more than `most_bytes` is an error."""
        ...

    def abort(self) -> None:
        """Called from another thread: end whatever is being waited for. Never raises."""
        ...

    def close(self) -> None: ...


Opener = Callable[[str, float], Session]
"""(resource, deadline in seconds) -> session."""
