"""The page stands alone, says what was stored, and hides nothing."""

from __future__ import annotations

import re
import xml.etree.ElementTree as ET
from dataclasses import replace
from html.parser import HTMLParser
from typing import Any

import pytest

from owlight.logbook.read import open_reader
from owlight.report import write_report
from owlight.report.facts import Facts, gather, gather_earlier
from owlight.report.order_figure import largest_change
from owlight.report.page import page
from owlight.vocabulary.events import AttemptFinished, Check, SafeState, SafeStepOutcome
from owlight.vocabulary.plan import Attempt, Point
from owlight.vocabulary.result import Conclusion
from owlight.vocabulary.values import Reading, Setting, Stamp, Term

QUESTIONS = ["Did it finish?", "Is the bench safe?", "What is the number?", "Can I believe it?", "What to redo?"]
QUESTIONS.append("What differs from last time?")
SWEPT_AND_READ = ("attenuator.attenuation", "power_meter.power", "signal_laser.power")


@pytest.fixture(scope="module")
def facts(told: Any) -> Facts:
    with open_reader(told.folder) as reader:
        return gather(reader, told.run_id)


@pytest.fixture(scope="module")
def earlier(told: Any) -> Facts | None:
    with open_reader(told.folder) as reader:
        return gather_earlier(reader, told.run_id)


class Balance(HTMLParser):
    """Every element that opens is closed in its turn."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.stack: list[str] = []
        self.words: list[str] = []
        self.feed(text)

    def handle_starttag(self, tag: str, attrs: Any) -> None:
        if tag != "meta":
            self.stack.append(tag)

    def handle_endtag(self, tag: str) -> None:
        assert self.stack.pop() == tag

    def handle_data(self, data: str) -> None:
        if self.stack and self.stack[-1] != "style":
            self.words.append(data)


def words_of(text: str) -> str:
    return " ".join(Balance(text).words)


def test_page_stands_alone(told: Any) -> None:
    with open_reader(told.folder) as reader:
        text = write_report(reader, told.run_id, told.folder).read_text("utf-8")
    assert not re.search(r"https?:|<script|<link|<img|src=|@import|url\(", text)
    assert Balance(text).stack == []


def test_six_questions_come_first(facts: Facts, earlier: Facts | None) -> None:
    words = words_of(page(facts, earlier))
    places = [words.index(question) for question in (*QUESTIONS, "The curve")]
    assert places == sorted(places)


def test_number_is_the_stored_one(facts: Facts) -> None:
    words = words_of(page(facts, None)).replace("−", "-")
    s = facts.sensitivities[0]
    for value in (s.received_power_dbm, s.low_dbm, s.high_dbm, s.statistical_low_dbm, s.statistical_high_dbm):
        assert f"{value:.3f}" in words
    for needed in ("receiver signal input", "total average, both polarisations", "7 % overhead", "3.8×10⁻³"):
        assert needed in words


def test_simulation_is_marked(facts: Facts) -> None:
    assert "not a measurement of hardware" in words_of(page(facts, None))
    real = replace(facts, header=replace(facts.header, simulated=False))
    assert "not a measurement of hardware" not in words_of(page(real, None))


def test_texts_are_escaped(facts: Facts) -> None:
    nasty = '<b onload="x">&"'
    text = page(replace(facts, plan=replace(facts.plan, name=nasty)), None)
    assert "<b onload" not in text and nasty in words_of(text)


def test_zero_errors_are_drawn_as_arrow(facts: Facts) -> None:
    assert facts.conclusion is not None
    points = facts.conclusion.points
    limit = replace(points[0], errors=0, ber=None, ber_low=0.0, ber_high=3e-6, upper_limit=True, fitted=False)
    changed = replace(facts, conclusion=replace(facts.conclusion, points=(limit, *points[1:])))
    before, after = page(facts, None), page(changed, None)
    # each picture exists wide and narrow
    assert before.count('class="limit ') == 0 and after.count('class="limit ') == 2
    assert "below 3×10⁻⁶" in words_of(after) and after.count('class="point') == before.count('class="point') - 2


def test_points_lie_on_their_scales(facts: Facts) -> None:
    assert facts.conclusion is not None
    svg = ET.fromstring(re.findall(r"<svg.*?</svg>", page(facts, None))[0])
    circles = [c for c in svg.iter("circle") if "point" in (c.get("class") or "")]
    import numpy as np

    y = np.array([float(c.get("cy") or 0) for c in circles])
    x = np.array([float(c.get("cx") or 0) for c in circles])
    log_ber = np.log10([p.ber or 1.0 for p in facts.conclusion.points])
    powers = np.array([p.received_power_dbm for p in facts.conclusion.points])
    for place, value in ((x, powers), (y, log_ber)):
        straight = np.polyval(np.polyfit(value, place, 1), value)
        assert np.max(np.abs(straight - place)) < 0.11  # coordinates are written to a tenth of a unit


def test_unconfirmed_safe_state_is_said(facts: Facts) -> None:
    steps = (SafeStepOutcome("signal_laser", "output off", "1", False),)
    words = words_of(page(replace(facts, safe_state=SafeState(Stamp("", 0.0, 1), False, steps)), None))
    assert "Not confirmed." in words and "Treat the light as on" in words
    assert "Unknown: no safe state was recorded." in words_of(page(replace(facts, safe_state=None), None))


def test_unopened_bench_is_not_called_dark(facts: Facts) -> None:
    """Nobody asked it: the light may be on, and the command that asks is given with the bench as it was named."""
    by = {**facts.written_by, "command_line": "owlight run power_log --bench 'my lab/bench.toml'"}
    header = replace(facts.header, state="gave up", reason="the laser does not answer")
    gave_up = replace(facts, safe_state=None, identities=(), header=header, written_by=by)
    words = words_of(page(gave_up, None))
    assert "Nothing was switched on" not in words and "Unknown: no safe state was recorded." in words
    assert "No instrument was opened by this run." in words and "owlight safe --bench 'my lab/bench.toml'" in words
    assert "owlight safe --bench bench" in words_of(page(replace(facts, safe_state=None), None))
    darkened = SafeState(Stamp("", 0.0, 1), True, (SafeStepOutcome("signal_laser", "output off", "0", True),))
    assert "Yes, confirmed by read-back." in words_of(page(replace(gave_up, safe_state=darkened), None))


@pytest.mark.parametrize("answered", [0, 5])
def test_too_little_measured_is_not_praised(facts: Facts, answered: int) -> None:
    """Silence of questions that nobody could answer speaks for nothing, with a sensitivity or without one."""
    c = facts.conclusion
    assert c is not None
    checks = tuple(
        Check(f"question {i}", "run", None, None, "ok" if i < answered else "not evaluated", "-") for i in range(31)
    )
    for found in (replace(c, checks=checks), replace(c, checks=checks, sensitivities=(), penalties=())):
        words = words_of(page(replace(facts, conclusion=found), None))
        assert "Nothing speaks against it" not in words
        assert f"Not enough was measured to say: {answered} of 31 questions answered." in words
    all_ok = tuple(replace(check, finding="ok") for check in checks)
    assert "Nothing speaks against it" in words_of(page(replace(facts, conclusion=replace(c, checks=all_ok)), None))
    nothing = replace(c, checks=all_ok, sensitivities=(), penalties=())
    assert "Not enough was measured to say: 31 of" in words_of(page(replace(facts, conclusion=nothing), None))


def test_simulated_times_are_told_apart(facts: Facts) -> None:
    """Stamps of a stepped bench lie ahead of the computer's clock."""
    assert words_of(page(facts, None)).count("UTC (simulated bench time)") == 1  # the safe state's
    assert " min (simulated bench time)" in words_of(page(facts, None))
    real = replace(facts, plan=replace(facts.plan, simulated=False))
    assert "simulated bench time" not in words_of(page(real, None))


def test_better_than_the_reference_is_below(facts: Facts) -> None:
    c = facts.conclusion
    assert c is not None
    better = replace(c, penalties=(replace(c.penalties[0], penalty_db=-0.3),))
    words = words_of(page(replace(facts, conclusion=better), None))
    assert words.count("0.30 dB below the shot-noise limit") == 2 and "−0.30" not in words


def test_small_repeatability_is_not_zero(facts: Facts) -> None:
    c = facts.conclusion
    assert c is not None
    points = (replace(c.points[0], received_power_u_db=4e-6), replace(c.points[1], received_power_u_db=0.0))
    text = page(replace(facts, conclusion=replace(c, points=(*points, *c.points[2:]))), None)
    cells = re.findall(r'data-head="repeatability / dB">([^<]*)<', text)
    assert cells[:2] == ["4×10⁻⁶", ""] and all(float(cell) > 0 for cell in cells[2:])
    assert "0.0000" not in words_of(text)


def test_still_power_is_not_called_motionless(facts: Facts) -> None:
    stay = facts.history[0]
    power = stay.received_power
    assert power is not None and power.tap_before_w is not None
    still = replace(stay, received_power=replace(power, tap_after_w=power.tap_before_w * (1 + 1e-5)))
    # 10 log10(1 + 1e-5) = 1e-4 / ln 10 = 4.34e-5
    assert largest_change(replace(facts, history=(still,))) == "at most 4.34×10⁻⁵ dB"


def test_doubt_and_failure_are_shown(facts: Facts) -> None:
    words = words_of(page(facts, None))
    assert "With reserve" in words and "2 of 3 captures locked" in words
    assert "a stay failed: the oscilloscope's record was short" in words and "owlight reproduce" in words


def test_difference_names_what_changed(facts: Facts, earlier: Facts | None) -> None:
    assert earlier is not None
    words = words_of(page(facts, earlier))
    moved_db = facts.sensitivities[0].received_power_dbm - earlier.sensitivities[0].received_power_dbm
    assert f"{moved_db:+.3f} dB".replace("-", "−") in words
    assert "signal_laser: firmware 1.2 became 1.3" in words and "seed 1 became 2" in words
    assert "There is no earlier run" in words_of(page(facts, None))


def test_common_doubt_cancels_only_when_shared(facts: Facts, earlier: Facts | None) -> None:
    assert earlier is not None
    other = tuple(replace(i, serial_number="OWL-PM-0002") if i.role == "power_meter" else i for i in facts.identities)
    assert "cancels" in words_of(page(facts, earlier))
    assert "cancels" not in words_of(page(replace(facts, identities=other), earlier))


def test_run_without_sensitivity_says_why(facts: Facts) -> None:
    empty = Conclusion(
        (), (), (), (), (Check("lock", "run", None, None, "not evaluated", "nothing"),), "No lock at all."
    )
    words = words_of(page(replace(facts, conclusion=empty, stays=()), None))
    assert "There is none." in words and "No lock at all." in words and "there is no curve" in words
    assert "no conclusion yet" in words_of(page(replace(facts, conclusion=None, history=(), stays=()), None))


def test_overdue_calibration_is_said(facts: Facts) -> None:
    late = replace(facts, header=replace(facts.header, started_utc="2028-01-01T00:00:00.000000Z"))
    assert "overdue since 2027-06-30" in words_of(page(late, None))
    assert "overdue" not in words_of(page(facts, None))


def test_what_was_not_assessed_is_printed(facts: Facts) -> None:
    assert "not assessed" in words_of(page(facts, None))


def test_everything_to_repeat_is_there(facts: Facts) -> None:
    words = words_of(page(facts, None))
    for needed in (facts.header.run_id, "owlight demo", *(source.sha256 for source in facts.sources)):
        assert needed in words
    assert facts.written_by["captures_sha256"] in words and "numpy 2.4.0" in words


def test_several_curves_are_told_apart(facts: Facts) -> None:
    c = facts.conclusion
    assert c is not None
    second = tuple(replace(p, group="lo_power 13 dBm", received_power_dbm=p.received_power_dbm - 0.5) for p in c.points)
    s = replace(c.sensitivities[0], group="lo_power 13 dBm")
    both = replace(c, points=(*c.points, *second), sensitivities=(*c.sensitivities, s))
    text = page(replace(facts, conclusion=both), None)
    assert "curve1" in re.findall(r"<svg.*?</svg>", text)[0] and "2 sensitivities." in words_of(text)


@pytest.fixture
def readings_alone(facts: Facts) -> Facts:
    """A finished run without captures: two points, two stays each, and a third stay that failed."""
    attenuation, meter, laser = (Term(*name.split(".")) for name in SWEPT_AND_READ)
    points = tuple(Point(i, (Setting(attenuation, 15.0 + i),)) for i in range(2))
    at = Stamp("2026-12-01T20:00:00.000000Z", 0.0, 1)

    def stay(index: int, number: int, power_w: float, outcome: str = "ok") -> AttemptFinished:
        read = (*(Reading(at, meter, power_w + off_w) for off_w in (-1e-8, 1e-8)), Reading(at, laser, 10.0))
        attempt = Attempt(points[index], number, 0, "pass", 0.0)
        return AttemptFinished(at, attempt, outcome, "", at, 1.0, None, read, (), (), ())

    history = (stay(0, 1, 12e-6), stay(1, 1, 9e-6), stay(1, 2, 9.2e-6), stay(0, 2, 12e-6), stay(0, 3, 5e-3, "failed"))
    plan = replace(facts.plan, points=points, capture=None, measurand=None, signal=None)
    header = replace(facts.header, state="finished", stays_failed=1)
    told = Conclusion((), (), (), (), (), "The sequence takes no captures: settings and readings are logged.")
    return replace(facts, header=header, plan=plan, conclusion=told, stays=(), history=history)


def test_readings_alone_are_the_result(readings_alone: Facts) -> None:
    text = page(readings_alone, None)
    section = re.findall(r"<h2>Readings</h2>(.*?)</section>", text, re.DOTALL)[0]
    rows = [re.findall(r"<td[^>]*>([^<]*)</td>", row) for row in re.findall(r"<tr>(.*?)</tr>", section)][1:]
    # deviations: of 12 -+ 0.01 twice, of 9 -+ 0.01 and 9.2 -+ 0.01 microwatts, by numpy.std(ddof=1)
    assert rows[0] == ["15 dB", "", "2", "12.000 ± 0.012 µW", "10 ± 0 dBm"]
    assert rows[1] == ["16 dB", "", "2", "9.10 ± 0.12 µW", "10 ± 0 dBm"]
    words = words_of(text)
    assert words.index("Readings") < words.index("Findings") and "The curve" not in words
    assert "readings were asked for" in words and "power_meter.power, signal_laser.power at 2 points" in words
    assert "asked yet" not in words and words.count("Nothing is asked of readings alone.") == 2
    assert "from stay_reading where run" in words and "ber_curve" not in words


def test_readings_beside_a_curve_come_later(facts: Facts, readings_alone: Facts) -> None:
    both = replace(facts, plan=replace(facts.plan, points=readings_alone.plan.points), history=readings_alone.history)
    words = words_of(page(both, None))
    assert words.index("The curve") < words.index("Points") < words.index("Readings") and "ber_curve" in words


def _luminance(colour: str) -> float:
    """Relative luminance, WCAG 2.2."""
    parts = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in parts]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def test_hues_stay_apart_in_grey(facts: Facts) -> None:
    style = re.findall(r"<style>(.*?)</style>", page(facts, None), re.DOTALL)[0]
    themes = re.findall(r"--paper: (#\w+); --ink: (#\w+).*?--x: (#\w{6}); --y: (#\w{6})", style, re.DOTALL)
    assert len(themes) == 3
    for paper, ink, x, y in themes:
        paper, ink = (c if len(c) == 7 else "#" + "".join(2 * digit for digit in c[1:]) for c in (paper, ink))
        light = {name: _luminance(colour) + 0.05 for name, colour in (("p", paper), ("i", ink), ("x", x), ("y", y))}
        assert max(light["x"] / light["y"], light["y"] / light["x"]) > 1.5
        # WCAG 2.2: 7 to 1 for text at level AAA (1.4.6), 3 to 1 for what a drawing needs (1.4.11)
        assert max(light["p"] / light["i"], light["i"] / light["p"]) > 7
        for hue in "xy":
            assert max(light["p"] / light[hue], light[hue] / light["p"]) > 3
