"""What a header of the command tree leads to, and the call that gets there."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from owlight.simulation.device.errors import DeviceError
from owlight.simulation.device.message import Parameter

Answer = str | bytes


@dataclass(frozen=True)
class Call:
    """One unit on its way: its parameters, the number in its header, and how to learn of a device clear."""

    parameters: tuple[Parameter, ...]
    suffix: int
    cleared: Callable[[], bool]
    answered: bool  # something waits in the output queue already


@dataclass(frozen=True)
class Entry:
    """`indefinite`: nothing may be asked after it in the same message (-440)."""

    run: Callable[[Call], Answer | None]
    indefinite: bool = False


def only(given: tuple[Parameter, ...]) -> Parameter:
    """The one parameter; -109 if it is missing, -108 if there are more."""
    if len(given) != 1:
        raise DeviceError(-108 if given else -109)
    return given[0]
