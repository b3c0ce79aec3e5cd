"""Several settings at once, in the order that is safe on a bench with light on it."""

from __future__ import annotations

from collections.abc import Iterable

from owlight.run.night import Night
from owlight.vocabulary.plan import Plan
from owlight.vocabulary.terms import RECEIVED_POWER
from owlight.vocabulary.values import Setting, Term, Value

SIGNAL_WAVELENGTH = Term("signal_laser", "wavelength")
LO_WAVELENGTH = Term("local_oscillator", "wavelength")
ATTENUATION = Term("attenuator", "attenuation")
_OUTPUTS = (Term("signal_laser", "output"), Term("local_oscillator", "output"))
_BY_ACTION = (SIGNAL_WAVELENGTH, LO_WAVELENGTH, RECEIVED_POWER, ATTENUATION)


def apply_settings(night: Night, settings: Iterable[Setting]) -> None:
    """Wavelengths in one dark action, sources off, powers, sources on; the attenuator last: all before may close it.

    Of a term that is asked for twice the later value counts.
    """
    values = {setting.term: setting.value for setting in settings}
    signal_nm, lo_nm = (number(values.get(term)) for term in (SIGNAL_WAVELENGTH, LO_WAVELENGTH))
    if signal_nm is not None or lo_nm is not None:
        night.bench.set_wavelength(signal_nm, lo_nm)
    for term in sorted(values.keys() - set(_BY_ACTION), key=lambda term: _rank(term, values[term])):
        night.bench.set(term, values[term])
    if RECEIVED_POWER in values:
        night.bench.set_received_power(float(values[RECEIVED_POWER]))
    elif ATTENUATION in values:
        night.bench.set(ATTENUATION, values[ATTENUATION])


def _rank(term: Term, value: Value) -> tuple[int, str]:
    return (1 if term not in _OUTPUTS else 2 if value else 0), str(term)


def of_attenuator(plan: Plan) -> tuple[Setting, ...]:
    """What [settings] asks of the attenuator: set again after everything that may have closed it."""
    return tuple(setting for setting in plan.settings if setting.term in (RECEIVED_POWER, ATTENUATION))


def number(value: Value | None) -> float | None:
    return None if value is None else float(value)
