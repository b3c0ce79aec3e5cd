"""Axes and marks in SVG. Colours and weights are classes, so that one drawing serves light, dark and paper."""

from __future__ import annotations

import math
from dataclasses import dataclass

from owlight.report.markup import Markup, element
from owlight.report.wording import decade, number

_STEPS = (1.0, 2.0, 5.0, 10.0)
_WITHIN_A_DECADE = (2, 5)


@dataclass(frozen=True)
class Axis:
    """From data to user units of the drawing; `low` lies at `start`. A log axis is given in decades."""

    low: float
    high: float
    start: float
    end: float

    def at(self, value: float) -> float:
        return round(self.start + (value - self.low) / (self.high - self.low) * (self.end - self.start), 2)

    def ticks(self, most: int) -> list[float]:
        """Round values, at most so many."""
        if self.high <= self.low:
            return []
        rough = (self.high - self.low) / most
        power = 10.0 ** math.floor(math.log10(rough))
        step = next(power * step for step in _STEPS if power * step >= rough * 0.999)
        first = math.ceil(self.low / step - 1e-9)
        return [round(i * step, 10) for i in range(first, math.floor(self.high / step + 1e-9) + 1)]


@dataclass(frozen=True)
class Frame:
    """One panel: a horizontal and a vertical axis."""

    x: Axis
    y: Axis

    def grid(self, most_x: int, most_y: int, label_x: bool = True) -> list[Markup]:
        """Lines and labels of both axes, at most so many lines each."""
        up = self.y.ticks(most_y)
        labels = [number(tick, _decimals(up)) for tick in up]
        return self._across(most_x, label_x) + self._up(up, labels)

    def decades(self, most_x: int) -> list[Markup]:
        """The same with a log axis upwards; over few decades 2 and 5 are marked as well."""
        up = [float(power) for power in range(math.ceil(self.y.low), math.floor(self.y.high) + 1)]
        marks = self._across(most_x, label_x=True) + self._up(up, [decade(int(power)) for power in up])
        if self.y.high - self.y.low > 4:
            return marks
        between = [
            (power + math.log10(times), f"{times}×{decade(power)}")
            for power in range(math.floor(self.y.low), math.ceil(self.y.high))
            for times in _WITHIN_A_DECADE
        ]
        shown = [(level, words) for level, words in between if self.y.low < level < self.y.high]
        return marks + self._up([level for level, _ in shown], [words for _, words in shown], "grid minor")

    def _across(self, most: int, label_x: bool) -> list[Markup]:
        ticks = self.x.ticks(most)
        marks = [line(self.x.at(t), self.y.start, self.x.at(t), self.y.end, "grid") for t in ticks]
        marks.append(line(self.x.start, self.y.start, self.x.end, self.y.start, "axis"))
        if label_x:
            words = [number(tick, _decimals(ticks)) for tick in ticks]
            places = zip(ticks, words, strict=True)
            marks += [text(self.x.at(t), self.y.start + 17, w, "tick middle") for t, w in places]
        return marks

    def _up(self, levels: list[float], labels: list[str], kind: str = "grid") -> list[Markup]:
        marks = [line(self.x.start, self.y.at(v), self.x.end, self.y.at(v), kind) for v in levels]
        places = zip(levels, labels, strict=True)
        return marks + [text(self.x.start - 7, self.y.at(v) + 4, w, "tick end") for v, w in places]


def _decimals(ticks: list[float]) -> int:
    return next((d for d in range(5) if all(abs(round(t, d) - t) < 1e-9 for t in ticks)), 5)


def line(x1: float, y1: float, x2: float, y2: float, kind: str) -> Markup:
    return element("line", x1=_n(x1), y1=_n(y1), x2=_n(x2), y2=_n(y2), class_=kind)


def path(points: list[tuple[float, float]], kind: str) -> Markup:
    steps = " ".join(f"{'L' if i else 'M'}{_n(x)} {_n(y)}" for i, (x, y) in enumerate(points))
    return element("path", d=steps, class_=kind)


def dot(x: float, y: float, radius: float, kind: str, title: str = "") -> Markup:
    return element("circle", _title(title), cx=_n(x), cy=_n(y), r=radius, class_=kind)


def diamond(x: float, y: float, radius: float, kind: str, title: str = "") -> Markup:
    corners = f"M{_n(x - radius)} {_n(y)}L{_n(x)} {_n(y - radius)}L{_n(x + radius)} {_n(y)}L{_n(x)} {_n(y + radius)}Z"
    return element("path", _title(title), d=corners, class_=kind)


def square(x: float, y: float, radius: float, kind: str, title: str = "") -> Markup:
    side = _n(1.8 * radius)
    left, top = _n(x - 0.9 * radius), _n(y - 0.9 * radius)
    return element("rect", _title(title), x=left, y=top, width=side, height=side, class_=kind)


def cross(x: float, y: float, radius: float, kind: str, title: str = "") -> Markup:
    strokes = (
        f"M{_n(x - radius)} {_n(y - radius)}L{_n(x + radius)} {_n(y + radius)}"
        f"M{_n(x - radius)} {_n(y + radius)}L{_n(x + radius)} {_n(y - radius)}"
    )
    return element("path", _title(title), d=strokes, class_=kind)


def box(x1: float, y1: float, x2: float, y2: float, kind: str) -> Markup:
    left, top = min(x1, x2), min(y1, y2)
    return element("rect", x=_n(left), y=_n(top), width=_n(abs(x2 - x1)), height=_n(abs(y2 - y1)), class_=kind)


def arrow_down(x: float, y: float, length: float, kind: str) -> Markup:
    """A bar with an arrow below: the value lies somewhere underneath."""
    foot = y + length
    left, middle, right = _n(x - 5), _n(x), _n(x + 5)
    shaft = f"M{left} {_n(y)}H{right}M{middle} {_n(y)}V{_n(foot)}"
    tip = f"M{_n(x - 4)} {_n(foot - 5)}L{middle} {_n(foot)}L{_n(x + 4)} {_n(foot - 5)}"
    return element("path", d=shaft + tip, class_=kind)


def text(x: float, y: float, words: str, kind: str) -> Markup:
    return element("text", words, x=_n(x), y=_n(y), class_=kind)


def drawing(marks: list[Markup], width: int, height: int, words: str, kind: str) -> Markup:
    """`words` say what the picture shows to those who cannot see it."""
    return element("svg", *marks, viewBox=f"0 0 {width} {height}", role="img", aria_label=words, class_=kind)


def _title(words: str) -> Markup | None:
    return element("title", words) if words else None


def _n(value: float) -> str:
    return f"{value:.1f}".rstrip("0").rstrip(".")
