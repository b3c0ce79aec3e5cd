"""An instrument at work: its tree, its settings, its status; one program message after the other."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Protocol, TypeVar

from owlight.simulation.device import common_commands, parameters
from owlight.simulation.device.bench_time import BenchTime
from owlight.simulation.device.entry import Answer, Call, Entry, only
from owlight.simulation.device.errors import DeviceError
from owlight.simulation.device.header import CommandTree, path_after
from owlight.simulation.device.message import Parameter, units
from owlight.simulation.device.model import InstrumentFile, Plain, ReadingFile
from owlight.simulation.device.setting import Setting
from owlight.simulation.device.status import COMMAND_WARNING, SETTLING, Status

Value = float | int | bytes
"""A reading in W, A, V ... that is spelled as this instrument speaks; a whole number; a block."""


class Behaviour(Protocol):
    """What an instrument of a kind does beyond holding settings."""

    readings: dict[str, Callable[[Call], Value]]
    actions: dict[str, Callable[[], None]]

    def reset(self, power_up: bool) -> None: ...


class _Nothing:
    """A laser, an attenuator and a pattern source only hold settings."""

    def __init__(self) -> None:
        self.readings: dict[str, Callable[[Call], Value]] = {}
        self.actions: dict[str, Callable[[], None]] = {}

    def reset(self, power_up: bool) -> None:
        """Nothing beyond the settings."""


@dataclass(frozen=True)
class _Operation:
    until_s: float
    bit: int
    opc_waits: bool


class Instrument:
    """`before_change` lets the light pass up to now under the old settings; `after_change` starts the new ones."""

    def __init__(self, role: str, file: InstrumentFile, serial_number: str, time: BenchTime) -> None:
        self.role = role
        self.file = file
        self.serial_number = serial_number
        self.time = time
        self.before_change: Callable[[], None] = lambda: None
        self.after_change: Callable[[], None] = lambda: None
        self.overheard: Callable[[str, bytes], None] = lambda message, response: None
        self.behaviour: Behaviour = _Nothing()
        self.power_up()
        self._tree: CommandTree[Entry] = CommandTree()
        common_commands.add_common(self, self._tree)
        self._add_settings()

    def power_up(self) -> None:
        """As after the mains switch: every setting at its power-up value, status fresh, PON set."""
        self.status = Status(self.file.language.queue_size)
        self.settings: dict[tuple[str, int], Setting] = {}
        for name, item in self.file.setting.items():
            for number in range(1, item.count + 1):
                self.settings[name, number] = Setting(name, item)
        self._operations: list[_Operation] = []
        self.opc_asked = False
        self.behaviour.reset(power_up=True)

    def behave(self, behaviour: Behaviour) -> None:
        """Add the readings and actions of the file; ValueError if this kind has none of that name."""
        self.behaviour = behaviour
        for name, reading in self.file.reading.items():
            run = _known(name, behaviour.readings, self.file)
            self._tree.add(reading.query, Entry(self._reader(reading, run)), (True,))
        for name, action in self.file.action.items():
            act = _known(name, behaviour.actions, self.file)
            self._tree.add(action.command, Entry(self._actor(name, act)), (False,))

    # ---- one message ----

    def execute(self, text: str, cleared: Callable[[], bool]) -> Iterator[Answer]:
        """The answers of one program message, in order. A command error ends it, other errors only their unit."""
        path: tuple[str, ...] = ()
        asked, indefinite = False, False
        try:
            for unit in units(text):
                found = self._tree.find(unit, path)
                path = path_after(unit, path)
                if unit.query and indefinite:
                    raise DeviceError(-440)
                self.refresh()
                answer = self._guarded(found.target, Call(unit.parameters, found.suffix, cleared, asked))
                indefinite = indefinite or found.target.indefinite
                if answer is not None:
                    asked = True
                    yield answer
        except DeviceError as error:
            self.status.report(error)
        self.time.wait_until(self.time.now_s() + self.file.language.message_takes_s, cleared)

    def _guarded(self, entry: Entry, call: Call) -> Answer | None:
        try:
            return entry.run(call)
        except DeviceError as error:
            if -200 < error.number <= -100:
                raise
            self.status.report(error)
            return None

    # ---- time ----

    def refresh(self) -> None:
        """Let the conditions say what is true now, and *OPC be answered if everything has ended."""
        now_s = self.time.now_s()
        bits = {operation.bit for operation in self._operations}
        self._operations = [operation for operation in self._operations if operation.until_s > now_s]
        for bit in bits - {operation.bit for operation in self._operations}:
            self.status.operation.change(bit, False)
        if self.opc_asked and self.pending_until_s() <= now_s:
            self.opc_asked = False
            self.status.standard_event |= 1

    def begin(self, seconds: float, bit: int, opc_waits: bool = True) -> None:
        """An operation that goes on after its command; its bit stands in the OPERation condition until it ends."""
        if seconds > 0.0:
            self._operations.append(_Operation(self.time.now_s() + seconds, bit, opc_waits))
            self.status.operation.change(bit, True)

    def pending_until_s(self) -> float:
        """When the last operation ends that `*OPC?` waits for."""
        return max((operation.until_s for operation in self._operations if operation.opc_waits), default=0.0)

    def end_operations(self, bit: int) -> None:
        self._operations = [operation for operation in self._operations if operation.bit != bit]
        self.status.operation.change(bit, False)

    # ---- settings ----

    def value(self, name: str, number: int = 1) -> Plain:
        """The setting as commanded, in the optics' unit."""
        return self.settings[name, number].target

    def value_at(self, name: str, moment_s: float, number: int = 1) -> Plain:
        """The setting as the light has followed it."""
        return self.settings[name, number].at(moment_s)

    def has(self, name: str) -> bool:
        return (name, 1) in self.settings

    def reset(self) -> None:
        """*RST: settings to their reset values, along the way that every change takes."""
        self.before_change()
        self.opc_asked = False
        for (name, number), setting in self.settings.items():
            if setting.target != setting.meant(setting.file.reset):
                self._move(name, number, setting.file.reset)
        self.behaviour.reset(power_up=False)
        self.after_change()

    def _move(self, name: str, number: int, plain: Plain) -> None:
        setting = self.settings[name, number]
        setting.move(plain, self.time.now_s())
        self.begin(setting.file.settles_s, SETTLING, setting.file.opc_waits)

    def _add_settings(self) -> None:
        for name, item in self.file.setting.items():
            self._tree.add(item.command, Entry(self._setter(name)), (False,))
            self._tree.add(item.command, Entry(self._getter(name)), (True,))

    def _setter(self, name: str) -> Callable[[Call], None]:
        def run(call: Call) -> None:
            setting = self._numbered(name, call.suffix)
            parameter = only(self._less_format(setting, call.parameters))
            value, clipped = setting.within(setting.parse(parameter, self.file.language.suffixes))
            if clipped and setting.file.beyond == "clip and say so":
                self.status.questionable.flash(COMMAND_WARNING)
            self.before_change()
            self._move(name, call.suffix, value)
            self.after_change()

        return run

    def _less_format(self, setting: Setting, given: tuple[Parameter, ...]) -> tuple[Parameter, ...]:
        """`FORMat INTeger,8` has a word before its number; only whole numbers are offered."""
        if setting.file.after and given:
            parameters.choice(given[0], (setting.file.after,))
            return given[1:]
        return given

    def _getter(self, name: str) -> Callable[[Call], str]:
        def run(call: Call) -> str:
            setting = self._numbered(name, call.suffix)
            if call.parameters:
                return self._spelled(setting.limit(only(call.parameters).text), setting)
            return self._spelled(setting.shown(self.time.now_s()), setting)

        return run

    def _numbered(self, name: str, number: int) -> Setting:
        if (name, number) not in self.settings:
            raise DeviceError(-114, f"{name} {number}")
        return self.settings[name, number]

    def _spelled(self, value: Plain, setting: Setting) -> str:
        if setting.file.type == "boolean":
            return setting.file.choices[bool(value)] if setting.file.choices else str(int(value))
        if setting.file.type == "integer":
            before = f"{parameters.short_form(setting.file.after)}," if setting.file.after else ""
            return before + str(int(value))
        if setting.file.type == "choice":
            return parameters.short_form(str(value))
        return self.number(float(value))

    def number(self, value: float) -> str:
        return parameters.nr3(value) if self.file.language.answers == "NR3" else parameters.nr2(value)

    # ---- readings and actions ----

    def _reader(self, file: ReadingFile, run: Callable[[Call], Value]) -> Callable[[Call], Answer]:
        def read(call: Call) -> Answer:
            if not 1 <= call.suffix <= file.channels:
                raise DeviceError(-114, str(call.suffix))
            value = run(call)
            if isinstance(value, bytes):
                return parameters.block(value)
            return str(value) if isinstance(value, int) else self.number(in_spoken_unit(value, file.unit))

        return read

    def _actor(self, name: str, act: Callable[[], None]) -> Callable[[Call], None]:
        word = self.file.action[name].parameter

        def run(call: Call) -> None:
            if word:
                parameters.choice(only(call.parameters), (word,))
            elif call.parameters:
                raise DeviceError(-108)
            act()

        return run


def in_spoken_unit(value: float, unit: str) -> float:
    """A reading that the optics give in W, as this instrument speaks it; no level in the dark."""
    if unit != "DBM":
        return value
    return parameters.level_dbm(value)


T = TypeVar("T")


def _known(name: str, known: dict[str, T], file: InstrumentFile) -> T:
    if name not in known:
        allowed = ", ".join(known) or "nothing"
        raise ValueError(f"{file.instrument}: a {file.kind} does not know {name!r}; it knows {allowed}")
    return known[name]
