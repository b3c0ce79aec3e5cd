"""What can go wrong, told apart only where somebody reacts differently; each class carries its exit status."""

from __future__ import annotations

from dataclasses import dataclass


class OwlightError(Exception):
    """The one root: the message says what happened and what is safe, then what to do."""

    exit_status = 1


@dataclass(frozen=True)
class Problem:
    """One mistake in one file: where it stands and what is allowed there."""

    file: str
    line: int | None
    key: str
    words: str

    def __str__(self) -> str:
        place = self.file if self.line is None else f"{self.file}:{self.line}"
        return f"{place}: {self.key}: {self.words}" if self.key else f"{place}: {self.words}"


class InputError(OwlightError):
    """The files or arguments are wrong; nothing was opened. All problems come at once."""

    exit_status = 2

    def __init__(self, words: str, problems: tuple[Problem, ...] = ()) -> None:
        self.words = words
        self.problems = problems
        super().__init__("\n".join([words, *(f"  {problem}" for problem in problems)]))


class BenchError(OwlightError):
    """The bench or one of its instruments failed."""

    exit_status = 3


class InUseError(BenchError):
    """Somebody else is measuring with an instrument of this bench; theirs is not to be darkened."""


class LinkError(BenchError):
    """A link fault: the session is poisoned; `maybe_executed` forbids repeating the message."""

    def __init__(self, words: str, role: str, trouble: str, maybe_executed: bool) -> None:
        self.role = role
        self.trouble = trouble
        self.maybe_executed = maybe_executed
        super().__init__(words)


class InstrumentError(BenchError):
    """An instrument answered, but refused, clipped or contradicted what was asked of it."""

    def __init__(self, words: str, role: str) -> None:
        self.role = role
        super().__init__(words)


class SafetyRefusal(OwlightError):
    """Refused, because a damage limit of the bench file could be exceeded."""

    exit_status = 4


class StorageError(OwlightError):
    """The logbook could not take what it was given; what it had taken before is kept."""

    exit_status = 5


class BusyError(StorageError):
    """Another run writes to this logbook."""


class StopNow(BaseException):
    """A person asked for the safe state at once; not an error, and no `except Exception` may catch it."""
