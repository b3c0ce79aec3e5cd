"""Whether the parts of a sequence fit together."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import replace

from owlight.errors import Problem
from owlight.reader import Document, nearest
from owlight.reader.lines import Path
from owlight.sequence.file import SequenceFile
from owlight.sequence.model import Sequence
from owlight.theory.ber import MODULATIONS
from owlight.vocabulary.terms import LO_POWER, RECEIVED_POWER
from owlight.vocabulary.values import Term

MOST_POINTS = 100_000
SIGNAL_POWER = Term("signal_laser", "power")
_TWO_HANDS = (
    (RECEIVED_POWER, Term("attenuator", "attenuation"), "the attenuator steers the received power"),
    (LO_POWER, Term("local_oscillator", "power"), "the laser's output decides the power at the LO port"),
)


def disagreements(
    document: Document[SequenceFile], sequence: Sequence, unknown: Mapping[str, Term | None]
) -> tuple[Problem, ...]:
    """Problems that no single key shows. An `unknown` name counts as what it means, and is not complained of again."""
    rules = [_parts, _sweeps, _two_hands, _decided_elsewhere, _signal]
    if None not in unknown.values():  # else what seems to be lacking may be there under its wrong name
        rules += [_light, _reference]
    asked = document if document.value is None else replace(document, value=_as_meant(document.value, unknown))
    guessed = {str(term) for term in unknown.values()}
    return tuple(
        document.problem(path, words)
        for rule in rules
        for path, words in rule(asked, sequence)
        if not guessed & {str(part) for part in path} and not _of_sweep(path, document) & unknown.keys()
    )


def _as_meant(file: SequenceFile, unknown: Mapping[str, Term | None]) -> SequenceFile:
    def name(text: str) -> str:
        return str(unknown.get(text) or text)

    sweeps = tuple(replace(sweep, setting=name(sweep.setting)) for sweep in file.sweep)
    return replace(file, sweep=sweeps, reference={name(key): raw for key, raw in file.reference.items()})


def _of_sweep(path: Path, document: Document[SequenceFile]) -> set[str]:
    """The name of the sweep that a path is in."""
    if document.value is None or path[0] != "sweep" or len(path) < 2:
        return set()
    return {document.value.sweep[int(path[1])].setting}


Found = Iterator[tuple[Path, str]]


def _parts(document: Document[SequenceFile], sequence: Sequence) -> Found:
    has = {key: document.holds((key,)) for key in ("measurand", "signal", "capture", "demodulation")}
    if has["capture"] and not has["measurand"]:
        yield ("capture",), "needs [measurand]: reference plane, power convention and threshold, or there is no result"
    if has["capture"] and not has["signal"]:
        yield ("capture",), "needs [signal]: without it no symbol can be found in a capture"
    if has["demodulation"] and not has["capture"]:
        yield ("demodulation",), "has nothing to work on without [capture]"
    if has["measurand"] and not has["capture"]:
        yield ("measurand",), "promises a sensitivity, but without [capture] no bit is counted"


def _sweeps(document: Document[SequenceFile], sequence: Sequence) -> Found:
    terms = [axis.term for axis in sequence.axes]
    swept = set()
    for place, sweep in enumerate(document.value.sweep if document.value else ()):
        if sweep.setting in swept:
            yield ("sweep", place, "setting"), f"{sweep.setting} is swept twice"
        swept.add(sweep.setting)
    for setting in sequence.settings:
        if setting.term in terms:
            yield ("settings", str(setting.term)), "is also swept; leave it out here"
    points = math.prod(len(axis.values) for axis in sequence.axes)
    if points > MOST_POINTS:
        yield ("sweep",), f"gives {points} points; at most {MOST_POINTS} are planned"


def _two_hands(document: Document[SequenceFile], sequence: Sequence) -> Found:
    places = _places(sequence)
    for quantity, setting, why in _TWO_HANDS:
        if quantity in places and setting in places:
            yield places[setting], f"contradicts {quantity}: {why}; give one of the two"


def _places(sequence: Sequence) -> dict[Term, Path]:
    places: dict[Term, Path] = {setting.term: ("settings", str(setting.term)) for setting in sequence.settings}
    return places | {axis.term: ("sweep", place, "setting") for place, axis in enumerate(sequence.axes)}


def _decided_elsewhere(document: Document[SequenceFile], sequence: Sequence) -> Found:
    names = {"sample_rate", "record_length"}
    for term, path in _places(sequence).items():
        if sequence.signal and term.role == "pattern_source" and term.name != "output":
            yield path, "[signal] decides this; leave it out here"
        if sequence.capture and term.role == "oscilloscope" and (term.name in names or term.name.startswith("range")):
            yield path, "[capture] decides this; leave it out here"


def _light(document: Document[SequenceFile], sequence: Sequence) -> Found:
    places = _places(sequence)
    if RECEIVED_POWER in places and SIGNAL_POWER not in places:
        yield ("settings",), f"lacks {SIGNAL_POWER}: without it no attenuation can be found for a received power"
    if sequence.capture and not places.keys() & {LO_POWER, Term("local_oscillator", "power")}:
        yield ("settings",), "lacks lo_power: a coherent receiver without local oscillator shows nothing"
    if sequence.measurand and str(RECEIVED_POWER) not in _swept(document):
        yield ("sweep",), "has no received_power, so there is no curve to read a sensitivity from"


def _signal(document: Document[SequenceFile], sequence: Sequence) -> Found:
    signal = sequence.signal
    if signal is None:
        return
    offsets = signal.pattern.tributary_offsets
    if offsets != "spread" and len(offsets) != 2 * signal.polarisations:
        yield ("signal", "pattern", "tributary_offsets"), f"needs {2 * signal.polarisations} offsets, one a lane"
    if signal.modulation not in MODULATIONS:
        hint = nearest(signal.modulation, MODULATIONS) or ";"
        yield ("signal", "modulation"), f"{signal.modulation!r} is not known{hint} Allowed: {', '.join(MODULATIONS)}"
    both = signal.polarisations == 2
    if sequence.measurand and ("both" in sequence.measurand.power) != both:
        yield ("measurand", "power"), f"does not fit polarisations = {signal.polarisations}"
    if sequence.demodulation and (sequence.demodulation.chain == "dual polarisation") != both:
        yield ("demodulation", "chain"), f"does not fit polarisations = {signal.polarisations}"
    occupied_hz = signal.symbol_rate_bd * (1 + signal.pulse.rolloff)
    if sequence.capture and sequence.capture.sample_rate_hz < occupied_hz:
        # each lane is real with half the occupied band (Nyquist)
        words = f"is below symbol rate times (1 + roll-off) = {occupied_hz / 1e9:.6g} GS/s, so the signal would fold"
        yield ("capture", "sample_rate"), words


def _reference(document: Document[SequenceFile], sequence: Sequence) -> Found:
    if sequence.reference is None:
        return
    named = document.value.reference.keys() - {"every"} if document.value else set()
    swept = _swept(document)
    for name in sorted(swept - named):
        yield ("reference",), f"lacks {name}: the reference point needs a value for every sweep"
    for name in sorted(named - swept):
        yield ("reference", name), f"{name} is not swept, so nothing would set it back"


def _swept(document: Document[SequenceFile]) -> set[str]:
    """By their names in the file: a sweep whose values are wrong is still a sweep."""
    return {sweep.setting for sweep in document.value.sweep} if document.value else set()
