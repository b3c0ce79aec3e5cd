"""From a dark bench to a steady one: settings, zero, light in the safe order, warm-up as a condition."""

from __future__ import annotations

from owlight.errors import BenchError
from owlight.run.night import Night
from owlight.statistics.drift import slope
from owlight.vocabulary.events import Note
from owlight.vocabulary.plan import Condition, Plan
from owlight.vocabulary.seeds import seed_for
from owlight.vocabulary.terms import LO_POWER, RECEIVED_POWER
from owlight.vocabulary.values import Reading, Setting, Term, Value

_LASERS = ("signal_laser", "local_oscillator")
_OF_LIGHT_UP = {LO_POWER, *(Term(role, name) for role in _LASERS for name in ("output", "power"))}
_LEAST_READINGS = 8
_MOST_READINGS = 60


def prepare(night: Night) -> None:
    """Everything before the first stay. Dark first: wavelength and zero need it; light comes up last."""
    plan = night.plan
    night.announce(seed_for(plan.seed, "prepare"), 0.0)
    for setting in dark_settings(plan):
        night.bench.set(setting.term, setting.value)
    wavelength = _first(plan, Term("signal_laser", "wavelength"))
    if wavelength is not None:
        night.bench.set_wavelength(float(wavelength))
    lo_wavelength = _first(plan, Term("local_oscillator", "wavelength"))
    if lo_wavelength is not None and lo_wavelength != wavelength:
        night.bench.set(Term("local_oscillator", "wavelength"), lo_wavelength)
    if "power_meter" in night.bench.roles:
        night.bench.zero_meter()
    lo_laser_power = _first(plan, Term("local_oscillator", "power"))
    if lo_laser_power is not None:
        night.bench.set(Term("local_oscillator", "power"), lo_laser_power)
    if night.stop.level:  # whoever asked for an end before the light came on gets none
        return
    lo_power, signal_power = _first(plan, LO_POWER), _first(plan, Term("signal_laser", "power"))
    night.bench.light_up(_number(lo_power), _number(signal_power))
    for condition in plan.conditions:
        wait_until(night, condition)


def dark_settings(plan: Plan) -> tuple[Setting, ...]:
    """What is set before any light: all but the lasers' powers and outputs; wavelength is an action of its own."""
    return tuple(s for s in plan.settings if s.term not in _OF_LIGHT_UP and s.term.name != "wavelength")


def _first(plan: Plan, term: Term) -> Value | None:
    """The value in the settings, or at the first point when the term is swept."""
    for setting in plan.settings:
        if setting.term == term:
            return setting.value
    return plan.points[0].value(term) if plan.points else None


def _number(value: Value | None) -> float | None:
    return None if value is None else float(value)


def wait_until(night: Night, condition: Condition) -> None:
    """Wait at the stated settings until the reading is steady; the measured slope is noted, a time-out fails.

    A person who asks to stop is not kept waiting: there is no point in hand yet.
    """
    for setting in condition.at:
        _apply(night, setting)
    every_s = condition.over_s / _LEAST_READINGS
    began_s = night.clock.monotonic_s()
    readings: list[Reading] = []
    while night.clock.monotonic_s() - began_s <= condition.at_most_s:
        if night.stop.level:
            return
        readings.append(night.bench.read(condition.reading, phase="warm-up"))
        window = [r for r in readings if r.at.monotonic_s >= readings[-1].at.monotonic_s - condition.over_s]
        spans_s = window[-1].at.monotonic_s - window[0].at.monotonic_s
        if len(window) >= _LEAST_READINGS and spans_s >= 0.8 * condition.over_s:
            drift_db, u_db = slope(window[-_MOST_READINGS:], condition.over_s)
            if abs(drift_db) + u_db < condition.drifts_less_than:
                words = f"{condition.reading} drifts {drift_db:+.4f} dB (standard uncertainty {u_db:.4f} dB)"
                night.emit(Note(night.stamper.stamp(), "info", f"{words} in {condition.over_s:g} s: steady."))
                return
        night.clock.sleep(every_s)
    raise BenchError(
        f"{condition.reading} did not become steady within {condition.at_most_s:g} s; the bench is made safe. "
        "Look at the warm-up readings in the logbook, then allow more time or mend the drift."
    )


def _apply(night: Night, setting: Setting) -> None:
    if setting.term == RECEIVED_POWER:
        night.bench.set_received_power(float(setting.value))
    else:
        night.bench.set(setting.term, setting.value)
