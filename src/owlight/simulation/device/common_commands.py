"""What every instrument knows: IEEE 488.2 chapter 10 and what SCPI-99 makes mandatory (volume 1, 4.2.1)."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING

from owlight.simulation.device import parameters
from owlight.simulation.device.entry import Call, Entry, only
from owlight.simulation.device.errors import DeviceError
from owlight.simulation.device.header import CommandTree
from owlight.simulation.device.status import Register

if TYPE_CHECKING:
    from owlight.simulation.device.instrument import Instrument

SCPI_VERSION = "1999.0"
_COMMAND, _QUERY = (False,), (True,)


def add_common(instrument: Instrument, tree: CommandTree[Entry]) -> None:
    """The mandatory commands, less what the dialect lacks."""
    language = instrument.file.language
    _add_488(instrument, tree)
    if language.opc_query:
        _query(tree, "*OPC", lambda call: _opc_query(instrument, call))
    if language.error_queue:
        _query(tree, "SYSTem:ERRor[:NEXT]", lambda _: instrument.status.queue.pop())
        _query(tree, "SYSTem:ERRor:ALL", lambda _: instrument.status.queue.pop_all())
        _query(tree, "SYSTem:ERRor:COUNt", lambda _: str(len(instrument.status.queue)))
    if language.status_registers:
        _query(tree, "SYSTem:VERSion", lambda _: SCPI_VERSION)
        _command(tree, "STATus:PRESet", lambda _: instrument.status.preset())
        _add_register(tree, "STATus:OPERation", lambda: instrument.status.operation)
        _add_register(tree, "STATus:QUEStionable", lambda: instrument.status.questionable)


def _query(tree: CommandTree[Entry], pattern: str, run: Callable[[Call], str], indefinite: bool = False) -> None:
    def checked(call: Call) -> str:
        if call.parameters:
            raise DeviceError(-108)
        return run(call)

    tree.add(pattern, Entry(checked, indefinite), _QUERY)


def _command(tree: CommandTree[Entry], pattern: str, run: Callable[[Call], None]) -> None:
    def checked(call: Call) -> None:
        if call.parameters:
            raise DeviceError(-108)
        run(call)

    tree.add(pattern, Entry(checked), _COMMAND)


def _add_488(instrument: Instrument, tree: CommandTree[Entry]) -> None:
    identity = instrument.file.identity
    fields = ",".join((identity.maker, identity.model, instrument.serial_number, identity.firmware))
    _query(tree, "*IDN", lambda _: fields, indefinite=True)
    _query(tree, "*ESR", lambda _: str(instrument.status.read_standard_event()))
    _query(tree, "*STB", lambda call: str(instrument.status.byte(call.answered)))
    _query(tree, "*TST", lambda _: "0")
    _command(tree, "*CLS", lambda _: _cls(instrument))
    _command(tree, "*RST", lambda _: instrument.reset())
    _command(tree, "*OPC", lambda _: _opc(instrument))
    _command(tree, "*WAI", lambda call: _wait(instrument, call))
    _add_mask(tree, "*ESE", lambda: instrument.status.standard_enable, lambda v: _set_ese(instrument, v), 255)
    _add_mask(
        tree, "*SRE", lambda: instrument.status.service_enable, lambda v: instrument.status.set_service_enable(v), 255
    )


def _set_ese(instrument: Instrument, value: int) -> None:
    instrument.status.standard_enable = value


def _cls(instrument: Instrument) -> None:
    instrument.status.clear()
    instrument.opc_asked = False


def _opc(instrument: Instrument) -> None:
    instrument.opc_asked = True
    instrument.refresh()


def _wait(instrument: Instrument, call: Call) -> None:
    instrument.time.wait_until(instrument.pending_until_s(), call.cleared)
    instrument.refresh()


def _opc_query(instrument: Instrument, call: Call) -> str:
    _wait(instrument, call)
    return "1"


def _add_mask(
    tree: CommandTree[Entry], pattern: str, get: Callable[[], int], put: Callable[[int], None], highest: int
) -> None:
    tree.add(pattern, Entry(lambda call: put(parameters.integer(only(call.parameters), 0, highest))), _COMMAND)
    _query(tree, pattern, lambda _: str(get()))


def _add_register(tree: CommandTree[Entry], root: str, register: Callable[[], Register]) -> None:
    _query(tree, f"{root}[:EVENt]", lambda _: str(register().read_event()))
    _query(tree, f"{root}:CONDition", lambda _: str(register().condition))
    for node, name in (("ENABle", "enable"), ("PTRansition", "rising"), ("NTRansition", "falling")):
        _add_mask(
            tree,
            f"{root}:{node}",
            lambda name=name: int(getattr(register(), name)),  # type: ignore[misc]
            lambda value, name=name: setattr(register(), name, value & 0x7FFF),  # type: ignore[misc]
            0xFFFF,
        )
