"""From a dark bench to a steady one: settings, zero, light in the safe order, warm-up as a condition."""

from __future__ import annotations

from owlight.errors import BenchError
from owlight.plan import light_at_start
from owlight.run.apply import (
    ATTENUATION,
    LO_WAVELENGTH,
    SIGNAL_WAVELENGTH,
    apply_settings,
    number,
    of_attenuator,
)
from owlight.run.night import Night
from owlight.statistics.drift import slope
from owlight.vocabulary.events import Note
from owlight.vocabulary.plan import Condition, Plan
from owlight.vocabulary.seeds import seed_for
from owlight.vocabulary.terms import LO_POWER, RECEIVED_POWER
from owlight.vocabulary.values import Reading, Setting, Term, Value

_LASERS = ("signal_laser", "local_oscillator")
_OF_LASERS = {Term(role, name) for role in _LASERS for name in ("output", "power", "wavelength")}
_WITH_LIGHT = {LO_POWER, RECEIVED_POWER, ATTENUATION, *_OF_LASERS}
_LEAST_READINGS = 8
_MOST_READINGS = 60


def prepare(night: Night) -> None:
    """Everything before the first stay. Dark first: wavelength and zero need it; light comes up last."""
    plan = night.plan
    night.announce(seed_for(plan.seed, "prepare"), 0.0)
    for setting in dark_settings(plan):
        night.bench.set(setting.term, setting.value)
    signal_nm, lo_nm = (number(_first(plan, term)) for term in (SIGNAL_WAVELENGTH, LO_WAVELENGTH))
    if signal_nm is not None or lo_nm is not None:
        night.bench.set_wavelength(signal_nm, lo_nm)
    if "power_meter" in night.bench.roles:
        night.bench.zero_meter()
    if night.stop.level:  # whoever asked for an end before the light came on gets none
        return
    night.bench.light_up(light_at_start(night.bench.paper, plan.settings, plan.points, plan.conditions))
    apply_settings(night, of_attenuator(plan))
    for condition in plan.conditions:
        wait_until(night, condition)
    if night.stop.level:
        return
    _set_back(night)
    for setting in plan.settings:
        if setting.term != RECEIVED_POWER:  # steered by the tap, no setting of an instrument
            night.bench.confirm(setting)


def _set_back(night: Night) -> None:
    """What [settings] says, where a condition was waited for with something else."""
    changed = {setting.term for condition in night.plan.conditions for setting in condition.at}
    if not changed:
        return
    fixed = (setting for setting in night.plan.settings if setting.term in changed)
    apply_settings(night, (*of_attenuator(night.plan), *fixed))


def dark_settings(plan: Plan) -> tuple[Setting, ...]:
    """What is set before any light: all but the lasers' settings, which are actions of their own, and attenuation."""
    return tuple(s for s in plan.settings if s.term not in _WITH_LIGHT)


def _first(plan: Plan, term: Term) -> Value | None:
    """The value in the settings, or at the first point when the term is swept."""
    for setting in plan.settings:
        if setting.term == term:
            return setting.value
    return plan.points[0].value(term) if plan.points else None


def wait_until(night: Night, condition: Condition) -> None:
    """Wait at the stated settings until the reading is steady; the measured slope is noted, a time-out fails.

    A person who asks to stop is not kept waiting: there is no point in hand yet.
    """
    apply_settings(night, (*of_attenuator(night.plan), *condition.at))
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
