"""The BER curve: counts with their intervals, the fitted curve, the threshold and where the two meet."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from owlight.report import drawing as d
from owlight.report.answers import decimals
from owlight.report.facts import Facts
from owlight.report.fitted import fitted_ber
from owlight.report.markup import Markup
from owlight.report.wording import counted, level, ratio
from owlight.vocabulary.result import CurvePoint, Sensitivity

_ARROW = 20.0
_SHAPES = (d.dot, d.diamond, d.square)
"""Curves differ in shape as well as in hue, so that grey paper tells them apart."""


@dataclass(frozen=True)
class Size:
    width: int
    height: int
    left: int
    kind: str


WIDE = Size(960, 430, 62, "wide")
NARROW = Size(360, 340, 52, "narrow")


def curve_figure(facts: Facts, size: Size) -> Markup | None:
    points = facts.conclusion.points if facts.conclusion else ()
    drawn = tuple(point for point in points if point.bits)
    if not drawn:
        return None
    frame = _frame(facts, drawn, size)
    marks = frame.decades(11 if size is WIDE else 5)
    marks += _threshold(facts, frame, named=size is WIDE)
    curves = tuple(dict.fromkeys(point.group for point in drawn))
    for number, group in enumerate(curves):
        hue = f"curve{number % 4}"
        found = next((s for s in facts.sensitivities if s.group == group), None)
        of_group = tuple(point for point in drawn if point.group == group)
        if found is not None and facts.plan.signal is not None:
            marks += _fitted(found, facts.plan.signal.modulation, of_group, frame, hue)
            marks += _sensitivity(found, facts, frame, hue, label=len(curves) == 1)
        marks += [mark for point in of_group for mark in _point(point, frame, number)]
    if len(curves) > 1:
        marks += _legend(curves, frame)
    marks += _titles(facts, frame, size)
    return d.drawing(marks, size.width, size.height, _in_words(facts, drawn), size.kind)


def _frame(facts: Facts, points: tuple[CurvePoint, ...], size: Size) -> d.Frame:
    powers = [point.received_power_dbm for point in points]
    levels = [point.ber_high for point in points] + [point.ber_low for point in points if point.ber_low > 0]
    if facts.plan.measurand:
        levels.append(facts.plan.measurand.threshold_ber)
    margin = max(0.04 * (max(powers) - min(powers)), 0.1)
    # room below a limit for its arrow
    below = 0.7 if any(point.upper_limit for point in points) else 0.12
    x = d.Axis(min(powers) - margin, max(powers) + margin, size.left, size.width - 14)
    y = d.Axis(math.log10(min(levels)) - below, math.log10(max(levels)) + 0.15, size.height - 44, 30)
    return d.Frame(x, y)


def _titles(facts: Facts, frame: d.Frame, size: Size) -> list[Markup]:
    plane = facts.plan.measurand.reference_plane if facts.plan.measurand else "the tap's plane"
    words = f"received power at the {plane} / dBm" if size is WIDE else "received power / dBm"
    return [
        d.text(frame.x.start, 16, "bit error ratio", "title"),
        d.text(frame.x.end, size.height - 6, words, "title end"),
    ]


def _threshold(facts: Facts, frame: d.Frame, named: bool) -> list[Markup]:
    m = facts.plan.measurand
    if m is None:
        return []
    y = frame.y.at(math.log10(m.threshold_ber))
    words = f"{m.threshold_name}: {ratio(m.threshold_ber)}" if named else ratio(m.threshold_ber)
    return [d.line(frame.x.start, y, frame.x.end, y, "threshold"), d.text(frame.x.end - 2, y - 6, words, "note end")]


def _fitted(
    found: Sensitivity, modulation: str, points: tuple[CurvePoint, ...], frame: d.Frame, hue: str
) -> list[Markup]:
    """Solid between the points that were fitted, dashed where nothing was."""
    power_dbm = np.linspace(frame.x.low, frame.x.high, 161)
    log_ber = np.log10(np.maximum(fitted_ber(found, modulation, power_dbm), 1e-300))
    inside = (log_ber > frame.y.low) & (log_ber < frame.y.high)
    powers = [point.received_power_dbm for point in points if point.fitted]
    ends = (min(powers), max(powers)) if powers else (math.inf, -math.inf)
    parts = ((power_dbm <= ends[0]), (power_dbm >= ends[0]) & (power_dbm <= ends[1]), (power_dbm >= ends[1]))
    marks = []
    for part, kind in zip(parts, ("dashed", "solid", "dashed"), strict=True):
        chosen = part & inside
        if chosen.sum() > 1:
            places = [(frame.x.at(p), frame.y.at(b)) for p, b in zip(power_dbm[chosen], log_ber[chosen], strict=True)]
            marks.append(d.path(places, f"fit {kind} {hue}"))
    return marks


def _sensitivity(found: Sensitivity, facts: Facts, frame: d.Frame, hue: str, label: bool) -> list[Markup]:
    """The total interval as a band, the statistical one darker inside it, and a line down to the axis."""
    assert facts.plan.measurand is not None
    y, x = frame.y.at(math.log10(facts.plan.measurand.threshold_ber)), frame.x.at(found.received_power_dbm)
    inside = [min(max(frame.x.at(v), frame.x.start), frame.x.end) for v in (found.low_dbm, found.high_dbm)]
    tight = [frame.x.at(v) for v in (found.statistical_low_dbm, found.statistical_high_dbm)]
    marks = [
        d.box(inside[0], frame.y.start, inside[1], y, "total"),
        d.box(tight[0], frame.y.start, tight[1], y, "statistical"),
        d.line(x, frame.y.start, x, y, f"drop {hue}"),
    ]
    if label:
        marks.append(
            d.text(
                inside[0] - 6, frame.y.start - 8, level(found.received_power_dbm, decimals(found)), "note strong end"
            )
        )
    return marks


def _point(point: CurvePoint, frame: d.Frame, number: int) -> list[Markup]:
    hue = f"curve{number % 4}"
    x = frame.x.at(point.received_power_dbm)
    if point.upper_limit or point.ber is None:
        return [d.arrow_down(x, frame.y.at(math.log10(point.ber_high)), _ARROW, f"limit {hue}")]
    low = max(math.log10(point.ber_low), frame.y.low) if point.ber_low > 0 else frame.y.low
    top, foot = frame.y.at(math.log10(point.ber_high)), frame.y.at(low)
    words = f"point {point.point}: {level(point.received_power_dbm)}, {point.errors} errors in {point.bits} bits"
    kind = f"point {hue}" if point.fitted else f"point open {hue}"
    return [
        d.line(x, top, x, foot, f"interval {hue}"),
        d.line(x - 4, top, x + 4, top, f"interval {hue}"),
        d.line(x - 4, foot, x + 4, foot, f"interval {hue}"),
        _SHAPES[number % len(_SHAPES)](x, frame.y.at(math.log10(point.ber)), 4, kind, words),
    ]


def _legend(curves: tuple[str, ...], frame: d.Frame) -> list[Markup]:
    """In the lower left corner, which a falling curve leaves free."""
    marks = []
    for number, group in enumerate(reversed(curves)):
        which = len(curves) - 1 - number
        x, y = frame.x.start + 14, frame.y.start - 14 - 18 * number
        marks.append(_SHAPES[which % len(_SHAPES)](x, y, 4, f"point curve{which % 4}", ""))
        marks.append(d.text(x + 12, y + 4, group, "note"))
    return marks


def _in_words(facts: Facts, points: tuple[CurvePoint, ...]) -> str:
    powers = [point.received_power_dbm for point in points]
    words = f"Bit error ratio against received power, {counted(len(points), 'point')} from {level(min(powers))} "
    words += f"to {level(max(powers))}."
    return words + "".join(f" Sensitivity {level(s.received_power_dbm)}." for s in facts.sensitivities)
