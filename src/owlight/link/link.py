"""A link: one thread that alone touches the session, and a caller that never waits longer than it said.

After any exception the session is poisoned: a late answer would otherwise be taken for that of the next question. It is
never read again; `reopen` makes a new one and proves that the same instrument answers.
"""

from __future__ import annotations

import hashlib
import queue
import threading
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Generic, TypeVar

import numpy as np

from owlight.clock import Clock, WallClock
from owlight.errors import LinkError
from owlight.link.faults import in_words
from owlight.link.session import Bytes, Opener, Session
from owlight.link.stamper import Stamper
from owlight.link.visa import open_visa
from owlight.vocabulary.events import Emit
from owlight.vocabulary.values import Exchange

OPEN_DEADLINE_S = 5.0
_SLICE_S = 0.1
_CLOSE_DEADLINE_S = 1.0
_SLACK_S = 0.25
"""The session's own time-out comes first and says more; ours ends what ignores it."""
_LONGEST_TEXT = 4096
_REAL = WallClock()  # deadlines of exchanges are real: scaled ones would turn load into time-outs
T = TypeVar("T")


@dataclass
class _Job(Generic[T]):
    work: Callable[[Session], T]
    done: threading.Event = field(default_factory=threading.Event)
    result: T | None = None
    fault: Exception | None = None


class _Worker:
    """Owns one session, from its opening to its end."""

    def __init__(self, name: str, opener: Callable[[], Session]) -> None:
        self.session: Session | None = None
        self._opener = opener
        self._jobs: queue.SimpleQueue[_Job[object] | None] = queue.SimpleQueue()
        threading.Thread(target=self._live, name=f"link {name}", daemon=True).start()

    def put(self, job: _Job[object] | None) -> None:
        self._jobs.put(job)

    def abandon(self) -> None:
        """Never spoken to again; whatever it is waiting for is cut."""
        if self.session is not None:
            self.session.abort()
        self._jobs.put(None)

    def _live(self) -> None:
        while (job := self._jobs.get()) is not None:
            try:
                if self.session is None:
                    self.session = self._opener()
                job.result = job.work(self.session)
            except Exception as fault:  # the back end raises bare Exception, OSError, RuntimeError and its own
                job.fault = fault
                job.done.set()
                break
            job.done.set()
        self._close()

    def _close(self) -> None:
        try:
            if self.session is not None:
                self.session.close()
        except Exception:
            pass  # a broken session may also fail to close; it is forgotten either way


class Link:
    """Messages to one instrument. `emit` gets every exchange on the caller's thread; `beat` is called while waiting."""

    def __init__(
        self,
        role: str,
        resource: str,
        emit: Emit,
        clock: Clock,
        opener: Opener = open_visa,
        beat: Callable[[], None] = lambda: None,
        stamper: Stamper | None = None,
    ) -> None:
        self.role = role
        self.resource = resource
        self.identity_text = ""
        self.abandoned = 0
        self._emit = emit
        self._stamper = stamper or Stamper(clock)
        self._opener = opener
        self._beat = beat
        self._worker: _Worker | None = None
        self._lock = threading.Lock()
        self._opening = False

    @property
    def healthy(self) -> bool:
        return self._worker is not None

    def open(self, deadline_s: float = OPEN_DEADLINE_S) -> None:
        """Open and prove: somebody answers `*IDN?`, and after a reopening the same one as before."""
        resource, opener = self.resource, self._opener
        self._worker = _Worker(self.role, lambda: opener(resource, deadline_s))
        self._opening = True
        try:
            answered = self.query("*IDN?", deadline_s)
        finally:
            self._opening = False
        if self.identity_text and answered != self.identity_text:
            self._poison()
            raise LinkError(
                f"At {self.resource} answers {answered!r}, where {self.identity_text!r} answered before. "
                "Nothing more is sent there; look at the address and at what is connected.",
                self.role,
                "changed identity",
                False,
            )
        self.identity_text = answered

    def reopen(self, deadline_s: float = OPEN_DEADLINE_S) -> None:
        """A new session in place of the old one; no message is repeated and no setting re-applied."""
        self.close()
        self.open(deadline_s)

    def write(self, message: str, deadline_s: float) -> None:
        """Send a program message that has no response."""
        self._exchange(message, lambda session: session.write(message, deadline_s), deadline_s)

    def query(self, message: str, deadline_s: float) -> str:
        """Send one program message and read its whole response before anything else is sent."""

        def work(session: Session) -> str:
            session.write(message, deadline_s)
            return session.read(deadline_s)

        return self._exchange(message, work, deadline_s)

    def query_block(self, message: str, expected_bytes: int, deadline_s: float, terminator_after: bool = True) -> Bytes:
        """A definite length block. A shorter one than expected is returned: a finding, and no fault of the link."""

        def work(session: Session) -> Bytes:
            return session.query_block(message, expected_bytes, terminator_after, deadline_s)

        return self._exchange(message, work, deadline_s)

    def close(self) -> None:
        worker, self._worker = self._worker, None
        if worker is not None:
            worker.put(None)

    def _exchange(self, message: str, work: Callable[[Session], T], deadline_s: float) -> T:
        with self._lock:
            worker = self._worker
            if worker is None:
                raise LinkError(
                    f"The link to {self.role} is not open, or was given up after a fault. Reopen it first.",
                    self.role,
                    "not open",
                    False,
                )
            began_s = _REAL.monotonic_s()
            job: _Job[T] = _Job(work)
            trouble = self._wait(worker, job, deadline_s)
            seconds = _REAL.monotonic_s() - began_s
        # else nothing ever left; a socket connects at its first message only
        sent = worker.session is not None and not isinstance(job.fault, ConnectionRefusedError)
        self._tell(message, job, seconds, trouble, sent)
        if trouble:
            raise LinkError(self._words(message, trouble, sent), self.role, trouble, sent)
        return job.result  # type: ignore[return-value]

    def _words(self, message: str, trouble: str, sent: bool) -> str:
        if self._opening:
            heard = f"nothing but {message} was sent" if sent else "nothing was sent"
            return (
                f"{self.role} ({self.resource}) could not be opened: {trouble}; {heard} to it. "
                "Check address, cable and power."
            )
        return (
            f"The link to {self.role} ({self.resource}) failed at {message[:80]!r}: {trouble}. "
            "The session is closed and what was measured is kept; look at the connection and the instrument."
        )

    def _wait(self, worker: _Worker, job: _Job[T], deadline_s: float) -> str:
        """What went wrong, or nothing. An exception of `beat` passes through, and poisons like any other."""
        worker.put(job)  # type: ignore[arg-type]
        end_s = _REAL.monotonic_s() + deadline_s + _SLACK_S
        try:
            while not job.done.wait(min(_SLICE_S, max(0.0, end_s - _REAL.monotonic_s()))):
                self._beat()
                if _REAL.monotonic_s() >= end_s:
                    self._poison()
                    return f"no end within {deadline_s:g} s"
        except BaseException:
            self._poison()
            raise
        if job.fault is not None:
            self._worker = None  # its thread closes the session and ends
            return in_words(job.fault)
        return ""

    def _poison(self) -> None:
        worker, self._worker = self._worker, None
        if worker is not None:
            self.abandoned += 1
            worker.abandon()

    def _tell(self, message: str, job: _Job[T], seconds: float, trouble: str, sent: bool) -> None:
        answered: object = None if trouble else job.result
        text = answered[:_LONGEST_TEXT] if isinstance(answered, str) else ""
        block = answered if isinstance(answered, np.ndarray) else None
        self._emit(
            Exchange(
                at=self._stamper.stamp(),
                role=self.role,
                sent=message,
                received=text,
                block_bytes=None if block is None else block.size,
                block_sha256=None if block is None else hashlib.sha256(block.data).hexdigest(),
                seconds=seconds,
                trouble=trouble,
                maybe_executed=bool(trouble) and sent,
            )
        )
