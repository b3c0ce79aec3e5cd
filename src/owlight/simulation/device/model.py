"""The file of a simulated instrument: its command tree, ranges, reset values, latencies and habits."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

from owlight.errors import Problem
from owlight.reader import Document, read
from owlight.simulation.device.header import nodes_of

Spoken = Literal["", "DBM", "W", "DB", "M", "NM", "HZ", "GHZ", "THZ", "S", "V", "A", "BD"]
Kind = Literal["laser", "attenuator", "power_meter", "pattern_source", "oscilloscope", "receiver"]
Plain = bool | int | float | str


@dataclass(frozen=True)
class Named:
    """The fields of `*IDN?`; the serial number belongs to the world, since one file may serve two roles."""

    maker: str
    model: str
    firmware: str


@dataclass(frozen=True)
class Language:
    """What the dialect lacks, and how it answers."""

    suffixes: bool = True  # false: any unit behind a number is refused, -138
    opc_query: bool = True  # false: *OPC? is an undefined header
    error_queue: bool = True  # false: SYSTem:ERRor? is an undefined header
    status_registers: bool = True  # false: no STATus subsystem
    answers: Literal["NR3", "NR2"] = "NR3"
    queue_size: int = 16
    message_takes_s: float = 0.0002  # from the terminator to the answer


@dataclass(frozen=True)
class SettingFile:
    """One setting. Numbers without unit here are in `unit`, the one that the instrument speaks.

    `settles`: how long the light, or whatever it moves, takes to follow; SETTling stands in OPERation until then.
    `opc_waits` false: `*OPC?` is answered before that. `beyond`: what happens outside the range.
    """

    command: str
    type: Literal["number", "integer", "boolean", "choice"] = "number"
    unit: Spoken = ""
    per: float = 1.0  # the term is this many times what is spoken: 8 for volts a division of eight
    lowest: float | None = None
    highest: float | None = None
    reset: Plain = 0
    power_up: Plain | None = None
    grid: float | None = None
    values: tuple[float, ...] = ()  # the only ones there are
    after: str = ""  # a word before the number, as in FORMat INTeger,8
    choices: tuple[str, ...] = ()  # of a boolean: its words for off and on
    meanings: tuple[str, ...] = ()
    count: int = 1
    settles_s: float = 0.0
    opc_waits: bool = True
    beyond: Literal["refuse", "clip", "clip and say so"] = "refuse"
    reads_back: Literal["set", "actual"] = "set"


@dataclass(frozen=True)
class ReadingFile:
    query: str
    unit: Spoken = ""
    channels: int = 1


@dataclass(frozen=True)
class ActionFile:
    command: str
    parameter: str = ""  # a word that must follow, such as ONCE
    takes_s: float = 0.0
    opc_waits: bool = True


@dataclass(frozen=True)
class RecordFile:
    """How an oscilloscope hands out its record."""

    byte_order: Literal["big", "little"] = "big"  # unless there is a setting byte_order
    stale_is_refused: bool = False  # false: a fetch without a new record repeats the old one


@dataclass(frozen=True)
class InstrumentFile:
    instrument: str
    format_version: int
    kind: Kind
    identity: Named
    language: Language = field(default_factory=Language)
    setting: dict[str, SettingFile] = field(default_factory=dict)
    reading: dict[str, ReadingFile] = field(default_factory=dict)
    action: dict[str, ActionFile] = field(default_factory=dict)
    record: RecordFile = field(default_factory=RecordFile)
    responsivity_slope: float = 0.0  # dB that a power meter reads too little a nm of wrong wavelength


def read_instrument(text: str, file: str) -> Document[InstrumentFile]:
    """All problems of the file at once, those of the tree included."""
    document = read(text, file, InstrumentFile)
    if document.value is None:
        return document
    return document.plus(tuple(_problems(document, document.value)))


def _problems(document: Document[InstrumentFile], value: InstrumentFile) -> list[Problem]:
    found = []
    patterns = {("setting", name, "command"): item.command for name, item in value.setting.items()}
    patterns |= {("reading", name, "query"): reading.query for name, reading in value.reading.items()}
    patterns |= {("action", name, "command"): action.command for name, action in value.action.items()}
    for path, pattern in patterns.items():
        try:
            nodes_of(pattern)
        except ValueError as error:
            found.append(document.problem(path, str(error)))
    for name, item in value.setting.items():
        if item.type == "choice" and not item.choices:
            found.append(document.problem(("setting", name), "a choice needs choices = [ ... ]"))
    return found
