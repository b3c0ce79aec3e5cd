"""Every limit held against every point before anything is opened."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator
from collections.abc import Sequence as Listing
from dataclasses import replace

from owlight.bench import (
    Bench,
    LightState,
    attenuation_for,
    fixed_pad_words,
    lo_laser_power_dbm,
    refuse_if_over,
    worst_case,
)
from owlight.errors import SafetyRefusal
from owlight.sequence import Sequence
from owlight.vocabulary.plan import Condition, PlanePower, Point
from owlight.vocabulary.terms import LO_POWER, RECEIVED_POWER
from owlight.vocabulary.values import Setting, Term, Value

SIGNAL_POWER = Term("signal_laser", "power")
SIGNAL_OUTPUT = Term("signal_laser", "output")
LO_LASER_POWER = Term("local_oscillator", "power")
LO_OUTPUT = Term("local_oscillator", "output")
ATTENUATION = Term("attenuator", "attenuation")


def light_state(bench: Bench, settings: Iterable[Setting]) -> LightState:
    """The light that these settings ask for. A source that nothing asks for is off; a power not named is unknown."""
    values: dict[Term, Value] = {setting.term: setting.value for setting in settings}
    signal_dbm, lo_dbm = _number(values, SIGNAL_POWER), _number(values, LO_LASER_POWER)
    if LO_POWER in values:
        lo_dbm = lo_laser_power_dbm(bench, float(values[LO_POWER]))
    attenuation_db = _number(values, ATTENUATION)
    if RECEIVED_POWER in values and signal_dbm is not None:
        attenuation_db = attenuation_for(bench, float(values[RECEIVED_POWER]), signal_dbm)
    if attenuation_db is None:
        attenuation_db = _closed_db(bench)
    signal_on = values.get(SIGNAL_OUTPUT, SIGNAL_POWER in values or RECEIVED_POWER in values)
    lo_on = values.get(LO_OUTPUT, LO_LASER_POWER in values or LO_POWER in values)
    return LightState(bool(signal_on), signal_dbm, bool(lo_on), lo_dbm, attenuation_db)


def light_at_start(
    bench: Bench, settings: Iterable[Setting], points: Listing[Point], conditions: Iterable[Condition]
) -> LightState:
    """What is lit once, behind the attenuator's maximum, before any condition and stay: only what something asks for.

    The powers are those of the settings, else of the first point; an output that is named there decides for itself.
    """
    at = (setting for condition in conditions for setting in condition.at)
    swept = (setting for point in reversed(points) for setting in point.settings)  # of a term the last one counts
    return replace(light_state(bench, (*at, *settings, *swept)), attenuation_db=_closed_db(bench))


def _closed_db(bench: Bench) -> float | None:
    """Where the bench puts its attenuator before any light; a bench without one has nothing to count on."""
    return bench.light_path.attenuator_maximum_db if "attenuator" in bench.role else None


def _number(values: dict[Term, Value], term: Term) -> float | None:
    return float(values[term]) if term in values else None


def light_states(
    bench: Bench, sequence: Sequence, points: tuple[Point, ...]
) -> Iterator[tuple[LightState, int | None]]:
    """Of each point, of the start, then of each waiting condition with what the ones before it left set."""
    for point in points:
        yield light_state(bench, (*sequence.settings, *point.settings)), point.index
    yield light_at_start(bench, sequence.settings, points, sequence.conditions), None
    asked = [*sequence.settings, *_first_values(sequence)]
    for condition in sequence.conditions:
        asked += condition.at
        yield light_state(bench, asked), None


def _first_values(sequence: Sequence) -> list[Setting]:
    return [Setting(axis.term, axis.values[0]) for axis in sequence.axes]


def refuse_over_limits(bench: Bench, sequence: Sequence, points: tuple[Point, ...]) -> None:
    """SafetyRefusal where a limit could be exceeded, told at the point that exceeds one the most."""
    states = list(light_states(bench, sequence, points))
    state, index = max(states, key=lambda each: _excess_db(bench, each[0]))
    asked = next((point.settings for point in points if point.index == index), ())
    refuse_if_over(bench, state, index, asked)


def _excess_db(bench: Bench, state: LightState) -> float:
    return max((power.power_dbm - power.limit_dbm for power in worst_case(bench, state)), default=-math.inf)


def highest_powers(bench: Bench, sequence: Sequence, points: tuple[Point, ...]) -> tuple[PlanePower, ...]:
    """For each plane the highest of all points, then what an attenuator at 0 dB would let through."""
    highest: dict[str, PlanePower] = {}
    opened: dict[str, PlanePower] = {}
    advice = ""
    for state, index in light_states(bench, sequence, points):
        _keep_highest(highest, worst_case(bench, state, index))
        open_state = LightState(state.signal_on, state.signal_power_dbm, state.lo_on, state.lo_power_dbm, 0.0)
        _keep_highest(opened, worst_case(bench, open_state))
        advice = advice or fixed_pad_words(bench, open_state)
    situation = "attenuator at 0 dB, sources as set" + f": {advice}" * bool(advice)
    unplanned = [PlanePower(each.plane, situation, each.power_dbm, each.limit_dbm, None) for each in opened.values()]
    return (*highest.values(), *unplanned)


def _keep_highest(highest: dict[str, PlanePower], powers: Iterable[PlanePower]) -> None:
    for power in powers:
        known = highest.get(power.plane)
        if known is None or power.power_dbm > known.power_dbm:
            highest[power.plane] = power


def longest_unattended_s(bench: Bench, sequence: Sequence) -> float | None:
    """How long the run may be left alone; None for a run that somebody watches."""
    if sequence.unattended is None or bench.unattended is None:
        return None
    return min(bench.unattended.at_most_s, sequence.unattended.at_most_s)


def refuse_unattended(bench: Bench, sequence: Sequence, powers: tuple[PlanePower, ...], forecast_s: float) -> None:
    """A run that nobody watches needs the bench's permission, its time, and a path that bears a reset attenuator."""
    if sequence.unattended is None:
        return
    allowed = bench.unattended
    if allowed is None:
        raise SafetyRefusal(
            "The sequence is meant to run unattended, but the bench has no [unattended]. Nothing was opened. "
            "Let the person responsible add who authorises it, whom to call and how long it may last."
        )
    longest_s = longest_unattended_s(bench, sequence)
    if longest_s is not None and forecast_s > longest_s:
        raise SafetyRefusal(
            f"The run is forecast to take {forecast_s / 3600:.1f} h, but it may be left alone for "
            f"{longest_s / 3600:.1f} h only. Nothing was opened. Ask for fewer points or passes."
        )
    over = next((power for power in powers if power.power_dbm > power.limit_dbm), None)
    if over is not None and not allowed.accepts_open_attenuator:
        raise SafetyRefusal(
            f"The {over.plane} could see {over.power_dbm:.2f} dBm, above its limit of {over.limit_dbm:.2f} dBm "
            f"({over.situation}), and nobody would be there. Nothing was opened. "
            "Fit the pad, or let a person accept it by name in the bench's [unattended] accepts_open_attenuator."
        )
