"""One page that stands alone: no network, light and dark, one or two sheets of paper."""

from __future__ import annotations

from importlib import resources
from pathlib import Path

from owlight.errors import StorageError
from owlight.logbook.read import Reader
from owlight.report import tables
from owlight.report.answers import Answer, answers, unasked
from owlight.report.curve_figure import NARROW, WIDE, Size, curve_figure
from owlight.report.facts import Facts, gather, gather_earlier
from owlight.report.markup import Inside, Markup, element, listed, together
from owlight.report.order_figure import largest_change, order_figure
from owlight.report.tributary_figure import tributary_figure
from owlight.report.wording import moment

_HALF = Size(520, 380, 56, "wide")
_POINTS = (
    "Repeatability is how well the tap's own readings repeat, as a standard uncertainty of the point's power; "
    "what the whole power axis may err by stands in the budget."
)
_READINGS = (
    "Each is the mean of all readings at the point ± the standard deviation of a single one; "
    "every reading is in the logbook."
)


def write_report(reader: Reader, run_id: str, folder: Path) -> Path:
    """Write the page of a run into `folder` and return its path; StorageError when the folder refuses."""
    facts = gather(reader, run_id)
    path = folder / f"report_{run_id[:8]}.html"
    try:
        path.write_text(page(facts, gather_earlier(reader, run_id)), "utf-8")
    except OSError as trouble:
        raise StorageError(
            f"The report could not be written to {path} ({trouble.strerror}); the logbook itself is untouched. "
            "Name a folder that can be written."
        ) from trouble
    return path


def page(facts: Facts, before: Facts | None) -> str:
    head = element(
        "head",
        Markup('<meta charset="utf-8"><meta name="viewport" content="width=device-width, initial-scale=1">'),
        element("title", f"{facts.plan.name} - {facts.header.run_id[:8]}"),
        element("style", Markup(resources.files("owlight.report").joinpath("page.css").read_text("utf-8"))),
    )
    body = element("body", element("main", _header(facts), _answers(answers(facts, before)), *_sections(facts)))
    return f"<!DOCTYPE html>\n{element('html', head, body, lang='en')}\n"


def _header(facts: Facts) -> Markup:
    mark = (
        element("p", "simulated: not a measurement of hardware", class_="simulated") if facts.header.simulated else None
    )
    about = f"run {facts.header.run_id[:8]}, begun {moment(facts.header.started_utc)}"
    return element("header", element("h1", facts.plan.name), mark, element("p", about))


def _answers(found: tuple[Answer, ...]) -> Markup:
    return element("div", *(_answer(answer) for answer in found), class_="answers")


def _answer(answer: Answer) -> Markup:
    command = element("code", answer.command, class_="command") if answer.command else None
    headline = element("p", answer.headline, class_="headline")
    return element("section", element("h3", answer.question), headline, listed(answer.details), command)


def _sections(facts: Facts) -> list[Markup]:
    readings = _section("Readings", tables.readings(facts), element("p", _READINGS))
    # without captures the readings are the result, and there is no curve to miss
    alone = facts.plan.capture is None
    found = [
        readings if alone else _section("The curve", *_curve(facts)),
        _section("The stays", _order(facts)) if alone else None,
        _section("Findings", tables.findings(facts) if facts.checks else element("p", unasked(facts))),
        _section("Points", tables.points(facts), element("p", _POINTS)),
        # beside a curve they are background: on paper they would cost the third sheet
        None if alone or readings is None else element("div", readings, class_="on-screen"),
        _section("Uncertainty", tables.budget(facts), element("p", tables.calibration(facts))),
        _section("Instruments", tables.instruments(facts)),
        _section("To repeat it", tables.repeat(facts)),
    ]
    return [section for section in found if section is not None]


def _section(title: str, *inside: Inside) -> Markup | None:
    return element("section", element("h2", title), *inside) if inside[0] else None


def _curve(facts: Facts) -> tuple[Inside, ...]:
    wide = curve_figure(facts, WIDE)
    if wide is None:
        return (element("p", "No bit was counted, so there is no curve."), _order(facts))
    both = together(wide, curve_figure(facts, NARROW))
    main = element("figure", both, element("figcaption", _curve_words(facts)), class_="main-figure")
    return (main, tables.penalties(facts), element("div", _order(facts), _tributaries(facts), class_="pair"))


def _curve_words(facts: Facts) -> str:
    words = "Each point is the pooled count of its stays with its exact 95 % interval; an arrow is an upper limit, "
    words += "no error was seen; an open point was not fitted. The curve is the fit, dashed where no point supports it."
    for s in facts.sensitivities[:1]:
        words += " Light band: total interval of the sensitivity; dark band: its statistical part. " + s.method + "."
    return words


def _order(facts: Facts) -> Markup | None:
    wide = order_figure(facts, _HALF)
    if wide is None:
        return None
    words = "Every stay in the order of time. Open diamonds are reference stays, crosses failed ones; "
    words += "bars are what the counts alone allow (95 %). "
    words += f"The tap's reading changed during a stay by {largest_change(facts)}."
    return element("figure", wide, order_figure(facts, NARROW), element("figcaption", words))


def _tributaries(facts: Facts) -> Markup | None:
    wide = tributary_figure(facts, _HALF)
    if wide is None:
        return None
    words = "The tributaries apart, since a pooled curve can hide a bad one: X and Y by hue, I solid, Q dashed."
    return element("figure", wide, tributary_figure(facts, NARROW), element("figcaption", words))
