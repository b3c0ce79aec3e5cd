"""Demodulation in a process of its own: what a spawned pool imports and calls."""

from __future__ import annotations

import os
import signal
import threading
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from owlight.vocabulary.captures import Capture, Demodulation

# inherited by the spawned process before it loads numpy: on small matrices two threads only wait for each other
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
_WATCH_S = 1.0


def initialise() -> None:
    """Leave Ctrl-C to the parent, end with it, and compile what has to be compiled."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    threading.Thread(target=_end_with, args=(os.getppid(), threading.Event()), daemon=True).start()
    warm()


def warm() -> None:
    """Load the kernels; at the first start of an installation they are compiled, which takes seconds."""
    import owlight.demodulation.journey
    import owlight.demodulation.kernels.cma  # noqa: F401


def demodulate_text(capture: Capture, chain_text: str) -> Demodulation:
    """`demodulate` with arguments that travel between processes."""
    from owlight.demodulation.chain import Chain
    from owlight.demodulation.journey import demodulate

    return demodulate(capture, Chain.from_text(chain_text))


def _end_with(parent: int, never: threading.Event) -> None:
    """A killed parent cannot say goodbye: an orphan would wait for work for ever."""
    while not never.wait(_WATCH_S):
        if os.getppid() != parent:
            os._exit(1)
