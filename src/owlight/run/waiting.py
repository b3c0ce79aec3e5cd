"""Demodulation beside the measurement: one worker process, at most one stay waiting for it."""

from __future__ import annotations

import multiprocessing
from collections.abc import Callable
from concurrent.futures import Future, ProcessPoolExecutor
from concurrent.futures import TimeoutError as NotYet
from concurrent.futures.process import BrokenProcessPool
from typing import Protocol

from owlight.demodulation import worker
from owlight.errors import BenchError, OwlightError
from owlight.run.attended import SLICE_S
from owlight.vocabulary.captures import Capture, Demodulation
from owlight.vocabulary.plan import ChainText

_ENDED = (
    "The demodulation process ended unexpectedly; captures already taken are kept. "
    "Look at free memory, then measure the missing points again."
)


class DemodulationFailedError(OwlightError):
    """One capture broke its demodulation: that stay failed, the night goes on."""


class Waiting(Protocol):
    """A demodulation that was asked for; `result` waits for it."""

    def result(self) -> Demodulation: ...


class Demodulator:
    """One spawned process that demodulates captures in the order they were handed in."""

    def __init__(self, chain: ChainText, checkpoint: Callable[[], None]) -> None:
        self._chain = chain
        self._checkpoint = checkpoint
        self._pool = ProcessPoolExecutor(
            max_workers=1, mp_context=multiprocessing.get_context("spawn"), initializer=worker.initialise
        )
        self._pool.submit(worker.warm)  # starts the process and its kernels while the bench warms up

    def later(self, capture: Capture) -> Waiting:
        try:
            return _Asked(self._pool.submit(worker.demodulate_text, capture, self._chain.text), self._checkpoint)
        except BrokenProcessPool as trouble:
            raise BenchError(_ENDED) from trouble

    def close(self, at_once: bool = False) -> None:
        self._pool.shutdown(wait=not at_once, cancel_futures=at_once)


LONGEST_WAIT_S = 120.0
"""A capture takes a second or two, and a first compilation of the kernels ten; a worker beyond this hangs."""


class _Asked:
    def __init__(self, future: Future[Demodulation], checkpoint: Callable[[], None]) -> None:
        self._future = future
        self._checkpoint = checkpoint

    def result(self) -> Demodulation:
        waited_s = 0.0
        while True:
            try:
                return self._future.result(timeout=SLICE_S)
            except NotYet:
                waited_s += SLICE_S
                if waited_s > LONGEST_WAIT_S:
                    words = f"the demodulation gave no answer within {LONGEST_WAIT_S:g} s; the capture is kept"
                    raise DemodulationFailedError(words) from None
                self._checkpoint()
            except BrokenProcessPool as trouble:
                raise BenchError(_ENDED) from trouble
            except Exception as trouble:
                words = f"the demodulation stopped with {type(trouble).__name__}: {trouble}; the capture is kept"
                raise DemodulationFailedError(words) from trouble
