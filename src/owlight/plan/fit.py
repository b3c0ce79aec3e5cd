"""Whether a sequence fits a bench: roles, ranges, reach, calibration."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping

from owlight.bench import Bench, attenuation_for, lo_laser_power_dbm, lowest_received_power_dbm
from owlight.driver import Driver
from owlight.errors import Problem
from owlight.plan.limits import ATTENUATION, LO_LASER_POWER, SIGNAL_OUTPUT, SIGNAL_POWER
from owlight.quantity import words
from owlight.sequence import Sequence
from owlight.vocabulary.plan import Point
from owlight.vocabulary.terms import LO_POWER, RECEIVED_POWER, TERMS
from owlight.vocabulary.values import Setting, Term

_WAVELENGTH = Term("signal_laser", "wavelength")
_BEHIND = {
    RECEIVED_POWER: ("signal_laser", "attenuator", "power_meter"),
    LO_POWER: ("local_oscillator",),
}
_OF_ATTENUATOR = {ATTENUATION, RECEIVED_POWER}
_SAME_WAVELENGTH_NM = 1e-6
Found = Iterator[tuple[str, str]]
Outside = tuple[Term, float, str]
"""A setting, its value, and what it is outside of."""


def misfits(
    bench: Bench,
    drivers: Mapping[str, Driver],
    sequence: Sequence,
    settings: tuple[Setting, ...],
    points: tuple[Point, ...],
) -> tuple[Problem, ...]:
    """Each as a problem of the sequence; a term is named once however many points ask for it."""
    asked = _asked(bench, sequence, settings, points)
    found = [
        *_roles(bench, sequence, settings),
        *_drivers(drivers, asked),
        *_at_once((*_ranges(drivers, asked), *_beliefs(bench, asked), *_calibration(bench, asked))),
        *_reach(bench, sequence, points),
        *_planes(bench, sequence),
        *_wavelengths(sequence, points),
        *_unlit(sequence, points),
        *_left_behind(sequence),
    ]
    return tuple(Problem(sequence.name, None, key, said) for key, said in dict.fromkeys(found))


def _asked(
    bench: Bench, sequence: Sequence, settings: tuple[Setting, ...], points: tuple[Point, ...]
) -> tuple[Setting, ...]:
    """Every setting that an instrument would get, those behind a quantity of the bench included."""
    at = (setting for condition in sequence.conditions for setting in condition.at)
    plain = dict.fromkeys((*settings, *at, *(setting for point in points for setting in point.settings)))
    behind = [
        Setting(LO_LASER_POWER, lo_laser_power_dbm(bench, float(each.value))) for each in plain if each.term == LO_POWER
    ]
    return (*(each for each in plain if each.term.role != "bench"), *behind)


def _roles(bench: Bench, sequence: Sequence, settings: tuple[Setting, ...]) -> Found:
    terms = [each.term for each in settings]
    terms += [axis.term for axis in sequence.axes] + list(sequence.readings)
    for condition in sequence.conditions:
        terms += [condition.reading, *(each.term for each in condition.at)]
    needed = [(str(term), role) for term in terms for role in _BEHIND.get(term, (term.role,))]
    if sequence.capture is not None:
        needed += [("capture", "oscilloscope")]
    for key, role in needed:
        if role not in bench.role:
            yield key, f"needs the role {role}, which the bench does not have"


def _drivers(drivers: Mapping[str, Driver], asked: tuple[Setting, ...]) -> Found:
    for setting in asked:
        driver = drivers.get(setting.term.role)
        if driver is not None and not driver.knows(setting.term):
            yield str(setting.term), f"is not in the driver {driver.driver}"


def _at_once(outside: Iterable[Outside]) -> Found:
    """One line a term and cause, however many values a sweep has."""
    causes: dict[tuple[Term, str], list[float]] = {}
    for term, value, why in outside:
        causes.setdefault((term, why), []).append(value)
    for (term, why), values in causes.items():
        low, high = (words(end, TERMS[term].unit) for end in (min(values), max(values)))
        told = f"{low} is" if len(values) == 1 else f"{len(values)} values from {low} to {high} are"
        yield str(term), f"{told} {why}"


def _ranges(drivers: Mapping[str, Driver], asked: tuple[Setting, ...]) -> Iterator[Outside]:
    for setting in asked:
        driver = drivers.get(setting.term.role)
        limits = driver.range_of(setting.term) if driver is not None and driver.knows(setting.term) else None
        if limits is None or isinstance(setting.value, str | bool):
            continue
        unit = TERMS[setting.term].unit
        low, high = limits
        if not low <= setting.value <= high:
            span = f"{words(low, unit)} to {words(high, unit)}"
            yield setting.term, setting.value, f"outside the instrument's range, {span}"


def _beliefs(bench: Bench, asked: tuple[Setting, ...]) -> Iterator[Outside]:
    """What the bench file says of its own instruments; their worst cases were computed with it."""
    for setting in asked:
        role = bench.role.get(setting.term.role)
        maximum_db = bench.light_path.attenuator_maximum_db
        if setting.term == ATTENUATION and not 0.0 <= float(setting.value) <= maximum_db:
            yield setting.term, float(setting.value), f"outside 0 dB to {words(maximum_db, 'dB')}"
        if role is None or role.highest_power_dbm is None or setting.term.name != "power":
            continue
        if float(setting.value) > role.highest_power_dbm:
            highest = f"the bench's highest_power of {words(role.highest_power_dbm, 'dBm')}"
            yield setting.term, float(setting.value), f"above {highest}"


def _reach(bench: Bench, sequence: Sequence, points: tuple[Point, ...]) -> Found:
    """One line a cause: which points ask for what, and what is possible."""
    fixed = {setting.term: setting.value for setting in sequence.settings}
    lowest_dbm = lowest_received_power_dbm(bench)
    maximum_db = bench.light_path.attenuator_maximum_db
    causes: dict[str, list[tuple[int, float]]] = {}
    for point in points:
        values = fixed | {setting.term: setting.value for setting in point.settings}
        received, signal = values.get(RECEIVED_POWER), values.get(SIGNAL_POWER)
        if received is None or signal is None:
            continue
        asked = (point.index, float(received))
        attenuation_db = attenuation_for(bench, float(received), float(signal))
        if not 0.0 <= attenuation_db <= maximum_db:
            high_dbm = float(received) + attenuation_db
            span = f"{high_dbm - maximum_db:.2f} to {high_dbm:.2f} dBm"
            causes.setdefault(f"the attenuator reaches {span}", []).append(asked)
        if lowest_dbm is not None and float(received) < lowest_dbm:
            said = f"the tap measures from {lowest_dbm:.2f} dBm on, ten times the meter's floor"
            causes.setdefault(said, []).append(asked)
    swept = next((place for place, axis in enumerate(sequence.axes, 1) if axis.term == RECEIVED_POWER), None)
    key = str(RECEIVED_POWER) if swept is None else f"sweep[{swept}]"
    for why, places in causes.items():
        yield key, f"{_asking(places)}; {why}"


def _asking(places: list[tuple[int, float]]) -> str:
    first, last = places[0][0], places[-1][0]
    low, high = (words(end, "dBm") for end in (min(p for _, p in places), max(p for _, p in places)))
    if len(places) == 1:
        return f"point {first} asks for {low}"
    many = (
        f"points {first} to {last}" if last - first + 1 == len(places) else f"{len(places)} of points {first} to {last}"
    )
    return f"{many} ask for {low} to {high}"


def _planes(bench: Bench, sequence: Sequence) -> Found:
    plane = bench.receiver.reference_plane
    if sequence.measurand is not None and sequence.measurand.reference_plane != plane:
        yield "measurand.reference_plane", f'is not the plane that the bench is calibrated for: "{plane}"'
    if sequence.signal is not None and sequence.signal.polarisations > bench.receiver.polarisations:
        yield "signal.polarisations", f"the receiver has lanes for {bench.receiver.polarisations}"


def _calibration(bench: Bench, asked: tuple[Setting, ...]) -> Iterator[Outside]:
    record = bench.plane_minus_tap
    for setting in asked:
        if setting.term == _WAVELENGTH and abs(float(setting.value) - record.wavelength_nm) > record.wavelength_span_nm:
            span = f"{words(record.wavelength_nm, 'nm')} within {words(record.wavelength_span_nm, 'nm')}"
            yield _WAVELENGTH, float(setting.value), f"outside the calibration, {span}"


def _wavelengths(sequence: Sequence, points: tuple[Point, ...]) -> Found:
    """Meter and attenuator follow the signal in one dark action, so they cannot stand at another wavelength."""
    for point in points:
        values = {each.term: each.value for each in (*sequence.settings, *point.settings)}
        signal = values.get(_WAVELENGTH)
        for role in ("power_meter", "attenuator"):
            own = values.get(Term(role, "wavelength"))
            if own is not None and signal is not None and abs(float(own) - float(signal)) > _SAME_WAVELENGTH_NM:
                said = f"{words(float(own), 'nm')} contradicts {_WAVELENGTH}, {words(float(signal), 'nm')}"
                yield f"{role}.wavelength", f"{said}: it is set with the signal's; leave it out"


def _unlit(sequence: Sequence, points: tuple[Point, ...]) -> Found:
    first = points[0].settings if points else ()
    stays = [point.settings for point in points] + [(*first, *condition.at) for condition in sequence.conditions]
    for settings in stays:
        values = {each.term: each.value for each in (*sequence.settings, *settings)}
        if RECEIVED_POWER in values and values.get(SIGNAL_OUTPUT) is False:
            yield str(SIGNAL_OUTPUT), f"is off where {RECEIVED_POWER} is asked for; leave out the one or the other"


def _left_behind(sequence: Sequence) -> Found:
    """What a condition sets must be set again by somebody, or every stay would be measured with it unsaid."""
    named = {each.term for each in sequence.settings} | {axis.term for axis in sequence.axes}
    if named & _OF_ATTENUATOR:
        named |= _OF_ATTENUATOR
    for condition in sequence.conditions:
        for each in condition.at:
            if each.term not in named:
                said = "is set for a condition but neither in [settings] nor swept, so nothing would set it back"
                yield str(each.term), said
