"""From the text of a sequence file to a sequence, or to every mistake in it."""

from __future__ import annotations

from owlight.errors import Problem
from owlight.reader import Document, nearest, read
from owlight.reader.lines import Path
from owlight.sequence.agreement import disagreements
from owlight.sequence.file import MeasurandTable, SequenceFile, SweepTable
from owlight.sequence.model import Axis, Demodulation, Reference, Sequence
from owlight.sequence.values import drift_unit, meant, number_in, stepped, term_named, value_for
from owlight.theory.thresholds import THRESHOLDS
from owlight.vocabulary.plan import Condition, Measurand
from owlight.vocabulary.terms import TERMS
from owlight.vocabulary.values import Setting, Term, Value

SETTABLE = ("setting", "quantity")
RECORDABLE = ("reading", "setting")


def read_sequence(text: str, file: str) -> Document[Sequence]:
    """A sequence whose terms, units and parts fit together; nothing is known of a bench yet."""
    written = read(text, file, SequenceFile)
    if written.value is None:
        return Document(file, None, written.problems, written.lines)
    resolving = _Resolving(written)
    sequence = resolving.sequence(written.value)
    problems = (*resolving.problems, *disagreements(written, sequence, resolving.unknown))
    document: Document[Sequence] = Document(file, sequence, written.problems, written.lines)
    return document.plus(problems)


class _Resolving:
    """Collects problems; what cannot be resolved is left out, so that the rest is still judged."""

    def __init__(self, document: Document[SequenceFile]) -> None:
        self._document = document
        self.problems: list[Problem] = []
        self.unknown: dict[str, Term | None] = {}
        """Names that are no term, and what they certainly mean."""

    def _wrong(self, path: Path, words: str) -> None:
        self.problems.append(self._document.problem(path, words))

    def sequence(self, file: SequenceFile) -> Sequence:
        demodulation = file.demodulation
        return Sequence(
            name=file.sequence,
            seed=file.seed,
            measurand=self._measurand(file.measurand) if file.measurand else None,
            signal=file.signal,
            settings=self._settings(file.settings, ("settings",)),
            conditions=self._conditions(file),
            axes=tuple(axis for place, sweep in enumerate(file.sweep) if (axis := self._axis(sweep, place))),
            reference=self._reference(file),
            readings=self._readings(file),
            capture=file.capture,
            demodulation=Demodulation(demodulation.chain, demodulation.stage) if demodulation else None,
            stop=file.stop,
            unattended=file.unattended,
        )

    def _term(self, text: str, kinds: tuple[str, ...], path: Path) -> Term | None:
        try:
            return term_named(text, kinds)
        except ValueError as error:
            self._wrong(path, str(error))
        if text in map(str, TERMS):
            return None
        self.unknown[text] = meant(text, kinds)
        return self.unknown[text]

    def _value(self, raw: object, term: Term, path: Path) -> Value | None:
        try:
            return value_for(raw, term)
        except ValueError as error:
            self._wrong(path, str(error))
            return None

    def _settings(self, raw: dict[str, object], path: Path) -> tuple[Setting, ...]:
        found = []
        for key, text in raw.items():
            term = self._term(key, SETTABLE, (*path, key))
            value = self._value(text, term, (*path, key)) if term else None
            if term and value is not None:
                found.append(Setting(term, value))
        return tuple(found)

    def _measurand(self, table: MeasurandTable) -> Measurand | None:
        name, ber = table.threshold.name, table.threshold.ber
        known = THRESHOLDS.get(name)
        if ber is None and known is None:
            hint = f"unknown threshold{nearest(name, THRESHOLDS) or ';'} Known: {', '.join(THRESHOLDS)}"
            self._wrong(("measurand", "threshold", "name"), f"{hint}; another name needs its ber beside it")
            return None
        if ber is not None and known is not None and ber != known.ber:
            words = f"is {ber:g}, but {known.ber:g} belongs to this name; leave it out or give it another name"
            self._wrong(("measurand", "threshold", "ber"), words)
        return Measurand(table.reference_plane, table.power, name, known.ber if known else ber or 0.0)

    def _conditions(self, file: SequenceFile) -> tuple[Condition, ...]:
        found = []
        for place, before in enumerate(file.before):
            path: Path = ("before", place, "wait_until")
            wait = before.wait_until
            at = self._settings(wait.at, (*path, "at"))
            term = self._term(wait.reading, ("reading",), (*path, "reading"))
            if wait.at_most_s < wait.over_s:
                self._wrong((*path, "at_most"), "is shorter than `over`, so the condition could never be met")
            if term is None:
                continue
            try:
                limit = number_in(wait.drifts_less_than, drift_unit(term))
            except ValueError as error:
                self._wrong((*path, "drifts_less_than"), str(error))
                continue
            if limit <= 0:
                self._wrong((*path, "drifts_less_than"), "must be above zero")
            found.append(Condition(term, at, limit, wait.over_s, wait.at_most_s))
        return tuple(found)

    def _axis(self, sweep: SweepTable, place: int) -> Axis | None:
        path: Path = ("sweep", place)
        term = self._term(sweep.setting, SETTABLE, (*path, "setting"))
        if term is None:
            return None
        if sweep.values is not None:
            if any(end is not None for end in (sweep.from_, sweep.to, sweep.step)):
                self._wrong((*path, "values"), "stands beside `from`, `to` or `step`; give the one or the others")
            pairs = [(*path, "values", number) for number in range(len(sweep.values))]
            listed = [self._value(raw, term, at) for raw, at in zip(sweep.values, pairs, strict=True)]
            values = tuple(value for value in listed if value is not None)
        else:
            values = self._stepped(sweep, term, path)
        self._judge_axis(sweep, term, values, path)
        return Axis(term, values, sweep.order) if values else None

    def _stepped(self, sweep: SweepTable, term: Term, path: Path) -> tuple[Value, ...]:
        ends = {"from": sweep.from_, "to": sweep.to, "step": sweep.step}
        missing = [key for key, raw in ends.items() if raw is None]
        if missing:
            self._wrong(path, f"needs `values`, or `from`, `to` and `step`; missing: {', '.join(missing)}")
            return ()
        if TERMS[term].type is not float:
            self._wrong((*path, "from"), f"{term} has no steps; list its values")
            return ()
        first, last = (self._value(ends[key], term, (*path, key)) for key in ("from", "to"))
        if first is None or last is None:
            return ()
        try:
            return stepped(float(first), float(last), sweep.step, term)
        except ValueError as error:
            self._wrong((*path, "step"), str(error))
            return ()

    def _judge_axis(self, sweep: SweepTable, term: Term, values: tuple[Value, ...], path: Path) -> None:
        if sweep.values is not None and not sweep.values:
            self._wrong((*path, "values"), "is empty; a sweep needs at least one value")
        if len(set(values)) < len(values):
            self._wrong((*path, "values"), "has a value twice; use passes to visit a point again")
        if sweep.order in {"ascending", "descending", "up-down"} and TERMS[term].type in (str, bool):
            self._wrong(
                (*path, "order"), f"{sweep.order} needs numbers, but {term} has none; list them as you want them"
            )

    def _reference(self, file: SequenceFile) -> Reference | None:
        if not file.reference:
            return None
        others = {key: raw for key, raw in file.reference.items() if key != "every"}
        settings = self._settings(others, ("reference",))
        every = file.reference.get("every")
        if type(every) is not int or every < 1:
            self._wrong(("reference", "every"), "needs a whole number of stays, at least 1")
            return None
        return Reference(every, settings)

    def _readings(self, file: SequenceFile) -> tuple[Term, ...]:
        found = []
        for place, text in enumerate(file.record.readings):
            path: Path = ("record", "readings", place)
            term = self._term(text, RECORDABLE, path)
            if term and TERMS[term].type is str and text not in self.unknown:
                self._wrong(path, f"{term} is no number and cannot be logged as a reading")
            elif term:
                found.append(term)
        return tuple(dict.fromkeys(found))
