"""From the text of a driver file to a driver, or to every mistake in it."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from owlight.driver.conversion import CONVERTIBLE, base_of
from owlight.driver.model import FITS, Driver, Reading, Setting, Settled, Span, difference_unit, plain, quantities
from owlight.reader import Document, nearest, read
from owlight.reader.lines import Path
from owlight.vocabulary.terms import ROLES, TERMS
from owlight.vocabulary.values import Term

Found = Iterator[tuple[Path, str]]
_KINDS = tuple(FITS) + tuple(role for role in ROLES if not any(role in roles for roles in FITS.values()))


def read_driver(text: str, file: str) -> Document[Driver]:
    """A driver that covers its role: every term is there, or said to be absent."""
    document = read(text, file, Driver)
    if document.value is None:
        return document
    rules = (_role, _coverage, _settings, _readings, _actions, _record)
    return document.plus(tuple(document.problem(path, words) for rule in rules for path, words in rule(document.value)))


def _role(driver: Driver) -> Found:
    if driver.role not in _KINDS:
        yield ("role",), f"unknown{nearest(driver.role, _KINDS) or ';'} Allowed: {', '.join(_KINDS)}"


def _coverage(driver: Driver) -> Found:
    tables: dict[str, Mapping[str, object]] = {
        "setting": driver.setting,
        "reading": driver.reading,
        "action": driver.action,
    }
    for kind, table in tables.items():
        for name in table:
            if name not in driver.terms:
                yield (kind, name), f"no such term{nearest(name, driver.terms) or ';'} Terms: {', '.join(driver.terms)}"
            elif TERMS[driver.terms[name]].kind != kind:
                yield (kind, name), f"is a {TERMS[driver.terms[name]].kind}, not a {kind}"
    for name in driver.absent:
        if name not in driver.terms:
            yield ("absent",), f"no such term: {name}"
        elif driver.knows(driver.terms[name]):
            yield ("absent",), f"{name} is said to be absent, but the file has it"
    for name, term in driver.terms.items():
        if not driver.knows(term) and name not in driver.absent:
            yield (TERMS[term].kind, name), 'is missing; give it, or name it in "absent"'


def _settings(driver: Driver) -> Found:
    for name, setting in driver.setting.items():
        term = driver.terms.get(name)
        if term is None:
            continue
        path: Path = ("setting", name)
        if setting.command.count("{value}") != 1:
            yield (*path, "command"), "needs {value} once, where the value stands"
        if TERMS[term].type is float:
            yield from _spoken(path, term, setting)
            yield from _numbers(path, term, setting)
        elif setting.speaks or setting.factor != 1.0 or setting.suffix:
            yield path, "speaks, factor and suffix belong to terms that are numbers with a unit"
        yield from _range(path, term, setting)
        yield from _words(path, term, setting)
        yield from _settled((*path, "settled"), driver, setting.settled, bool(setting.query))
        for other in setting.coupled:
            if other not in driver.setting:
                yield (*path, "coupled"), f"{other} is no setting of this driver"


def _spoken(path: Path, term: Term, speaker: Setting | Reading) -> Found:
    unit = TERMS[term].unit
    if base_of(speaker.speaks)[0] not in CONVERTIBLE[unit]:
        yield (*path, "speaks"), f"{speaker.speaks or 'nothing'!r} cannot be turned into {unit or 'a plain number'}"
    if speaker.factor == 0.0:
        yield (*path, "factor"), "is zero"


def _numbers(path: Path, term: Term, setting: Setting) -> Found:
    unit = TERMS[term].unit
    if setting.tolerance is None:
        yield (*path, "tolerance"), "is missing; without it no read-back can be judged"
    try:
        if setting.tolerance is not None:
            plain(setting.tolerance, difference_unit(unit))
    except ValueError as error:
        yield (*path, "tolerance"), str(error)


def _range(path: Path, term: Term, setting: Setting) -> Found:
    if not isinstance(setting.range_, Span):
        return
    if TERMS[term].type not in (int, float):
        yield (*path, "range"), "means nothing for a word or a switch"
        return
    try:
        low, high = quantities(setting.range_, TERMS[term].unit)
    except ValueError as error:
        yield (*path, "range"), str(error)
        return
    if low > high:
        yield (*path, "range"), "ends below its beginning"


def _words(path: Path, term: Term, setting: Setting) -> Found:
    kind = TERMS[term].type
    if kind is bool and setting.words and set(setting.words) != {"true", "false"}:
        yield (*path, "words"), "needs the words for true and for false"
    if kind in (int, float) and setting.words:
        yield (*path, "words"), "means nothing for a number"
    said = list(setting.words.values())
    if len(set(said)) != len(said):
        yield (*path, "words"), "says one word for two values"


def _settled(path: Path, driver: Driver, settled: Settled, has_query: bool) -> Found:
    if settled.by == "opc" and "*OPC?" in driver.lacks:
        yield path, 'cannot rest on *OPC?, which the driver lacks; use "condition", "stable" or "wait"'
    if settled.by == "condition" and "status registers" in driver.lacks and settled.query == "STAT:OPER:COND?":
        yield path, "cannot rest on a status register, which the driver lacks; name another query"
    if settled.by == "stable" and not has_query:
        yield path, "cannot rest on a read-back without a query"


def _readings(driver: Driver) -> Found:
    for name, reading in driver.reading.items():
        if name in driver.terms:
            yield from _spoken(("reading", name), driver.terms[name], reading)


def _actions(driver: Driver) -> Found:
    for name, action in driver.action.items():
        yield from _settled(("action", name, "settled"), driver, action.settled, False)


def _record(driver: Driver) -> Found:
    record = driver.record
    if record is None:
        return
    if "record" not in driver.terms:
        yield ("record",), f"means nothing for {driver.role}"
    yield from _settled(("record", "settled"), driver, record.settled, False)
    if "{channel}" not in record.fetch:
        yield ("record", "fetch"), "needs {channel}, where the number of the channel stands"
    if record.scaling.by == "queries" and not record.scaling.volts_per_code:
        yield ("record", "scaling"), "by queries needs volts_per_code"
    half = 1 << (8 * record.bytes_per_sample - 1)
    if not -half <= record.lowest_code < record.highest_code < half:
        yield ("record", "lowest_code"), f"and highest_code must lie within -{half} and {half - 1}"
