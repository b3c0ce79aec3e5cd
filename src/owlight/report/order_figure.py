"""The stays in the order of time: what was set, how each lies beside the curve, how still the power was."""

from __future__ import annotations

import math
from dataclasses import dataclass

from owlight.report import drawing as d
from owlight.report.curve_figure import Size
from owlight.report.facts import Facts
from owlight.report.fitted import deviation_db
from owlight.report.markup import Markup
from owlight.report.wording import counted, figure, level, seconds_between, signed
from owlight.statistics import exact_interval
from owlight.vocabulary.events import AttemptFinished

_GAP, _TOP, _FOOT = 30, 26, 40
_LEAST_SPAN_DB = 0.1
_FEWEST_ERRORS = 20


@dataclass(frozen=True)
class Mark:
    """A stay where it was in time; `hours` since the run began."""

    hours: float
    reference: bool
    failed: bool
    words: str
    power_dbm: float | None
    deviation_db: tuple[float, float, float] | None
    """Low, estimate, high: where the exact interval of the counts meets the curve."""
    change_db: float | None


@dataclass(frozen=True)
class Strip:
    """One of the panels above each other; `intervals` are bars from low to high, None where there is none."""

    title: str
    values: list[float | None]
    intervals: list[tuple[float, float] | None]
    around_zero: bool

    def axis(self, start: float, end: float) -> d.Axis:
        shown = [v for v in self.values if v is not None] + [v for ends in self.intervals if ends for v in ends]
        if self.around_zero:
            reach = max([abs(value) for value in shown] + [_LEAST_SPAN_DB / 2]) * 1.15
            return d.Axis(-reach, reach, start, end)
        margin = max(0.12 * (max(shown) - min(shown)), 0.2)
        return d.Axis(min(shown) - margin, max(shown) + margin, start, end)


def order_figure(facts: Facts, size: Size) -> Markup | None:
    marks = [_mark(facts, stay) for stay in facts.history]
    if not any(mark.power_dbm is not None for mark in marks):
        return None
    unit, factor = ("h", 1.0) if max(m.hours for m in marks) > 3 else ("min", 60.0)
    x = _time_axis([m.hours * factor for m in marks], size)
    strips = _strips(marks)
    height = (size.height - _TOP - _FOOT - (len(strips) - 1) * _GAP) / len(strips)
    drawn: list[Markup] = []
    for number_of, strip in enumerate(strips):
        foot = _TOP + (number_of + 1) * height + number_of * _GAP
        frame = d.Frame(x, strip.axis(foot, foot - height))
        last = number_of == len(strips) - 1
        drawn += frame.grid(8 if size.width > 500 else 4, 4, label_x=last)
        drawn.append(d.text(x.start, foot - height - 8, strip.title, "title"))
        drawn += _in_strip(marks, strip, frame, factor)
    drawn.append(d.text(x.end, size.height - 4, f"{unit} since the run began", "title end"))
    words = f"{counted(len(marks), 'stay')} in the order of time."
    return d.drawing(drawn, size.width, size.height, words, size.kind)


def _strips(marks: list[Mark]) -> list[Strip]:
    """The middle one only where there is a fitted curve to stand beside."""
    none: list[tuple[float, float] | None] = [None] * len(marks)
    aside = [m.deviation_db for m in marks]
    strips = [Strip("received power / dBm", [m.power_dbm for m in marks], none, around_zero=False)]
    if any(aside):
        middle, ends = [a[1] if a else None for a in aside], [(a[0], a[2]) if a else None for a in aside]
        strips.append(Strip("beside the fitted curve / dB", middle, ends, around_zero=True))
    return [*strips, Strip("tap after less before / dB", [m.change_db for m in marks], none, around_zero=True)]


def _in_strip(marks: list[Mark], strip: Strip, frame: d.Frame, factor: float) -> list[Markup]:
    across = [frame.x.at(m.hours * factor) for m in marks]
    places = [(x, frame.y.at(v), m) for x, v, m in zip(across, strip.values, marks, strict=True) if v is not None]
    if strip.around_zero:
        zero = frame.y.at(0.0)
        drawn = [d.line(frame.x.start, zero, frame.x.end, zero, "axis")]
    else:
        drawn = [d.path([(x, y) for x, y, _ in places], "order")]
    for x, ends in zip(across, strip.intervals, strict=True):
        if ends:
            drawn.append(d.line(x, frame.y.at(ends[0]), x, frame.y.at(ends[1]), "stem"))
    return drawn + [_symbol(x, y, mark) for x, y, mark in places]


def _symbol(x: float, y: float, mark: Mark) -> Markup:
    if mark.failed:
        return d.cross(x, y, 4, "failed", mark.words)
    if mark.reference:
        return d.diamond(x, y, 4.5, "reference", mark.words)
    return d.dot(x, y, 3, "stay", mark.words)


def _time_axis(hours: list[float], size: Size) -> d.Axis:
    length = max(max(hours) - min(hours), 1e-3)
    return d.Axis(min(0.0, min(hours)), max(hours) + 0.03 * length, size.left, size.width - 14)


def _mark(facts: Facts, stay: AttemptFinished) -> Mark:
    hours = (seconds_between(facts.header.started_utc, stay.started.utc) or 0.0) / 3600
    power = stay.received_power
    measured_dbm = power.received_power_dbm if power else None
    change_db = None
    if power and power.tap_before_w and power.tap_after_w and power.tap_before_w > 0 < power.tap_after_w:
        change_db = 10 * math.log10(power.tap_after_w / power.tap_before_w)
    name = f"point {stay.attempt.point.index}, stay {stay.attempt.number} ({stay.attempt.reason})"
    failed = stay.outcome == "failed"
    aside_db = None if failed else _deviation(facts, stay)
    words = [name, level(measured_dbm, 3) if measured_dbm is not None else "power not measured"]
    words += [f"failed: {stay.reason}"] if failed else []
    words += [f"{signed(aside_db[1], 3)} dB beside the curve"] if aside_db is not None else []
    at_dbm = measured_dbm if measured_dbm is not None else power.requested_dbm if power else None
    return Mark(hours, stay.attempt.point.reference, failed, ", ".join(words), at_dbm, aside_db, change_db)


def _deviation(facts: Facts, stay: AttemptFinished) -> tuple[float, float, float] | None:
    errors, bits = sum(x.errors for x in stay.demodulations), sum(x.bits for x in stay.demodulations)
    found = next((s for s in facts.sensitivities if s.group == stay.attempt.point.group), None)
    power_dbm = stay.received_power.received_power_dbm if stay.received_power else None
    if found is None or facts.plan.signal is None or power_dbm is None or errors < _FEWEST_ERRORS:
        return None
    low, high = exact_interval(errors, bits)
    ends = [deviation_db(found, facts.plan.signal.modulation, power_dbm, ber) for ber in (low, errors / bits, high)]
    low_db, middle_db, high_db = ends
    return None if low_db is None or middle_db is None or high_db is None else (low_db, middle_db, high_db)


def largest_change(facts: Facts) -> str:
    """In words, for the caption."""
    changes = [m.change_db for m in (_mark(facts, s) for s in facts.history) if m.change_db is not None]
    return f"at most {figure(max(abs(c) for c in changes))} dB" if changes else "not read on both sides"
