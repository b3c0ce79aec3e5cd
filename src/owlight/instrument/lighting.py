"""Light up, make dark, change the wavelength, zero the meter: each as one action in the order that is safe."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from owlight.bench import LightState
from owlight.errors import BenchError, InstrumentError
from owlight.instrument.light_keeper import ATTENUATION, BIAS, FIELDS, LO_OUTPUT, LO_POWER, SIGNAL_OUTPUT, SIGNAL_POWER
from owlight.quantity import watts, words
from owlight.vocabulary.values import Term

if TYPE_CHECKING:
    from owlight.instrument.open_bench import OpenBench

METER = Term("power_meter", "power")
ZERO = Term("power_meter", "zero")
AVERAGING = Term("power_meter", "averaging_time")
SIGNAL_WAVELENGTH = Term("signal_laser", "wavelength")
LO_WAVELENGTH = Term("local_oscillator", "wavelength")
_FOLLOW_THE_SIGNAL = (SIGNAL_WAVELENGTH, Term("power_meter", "wavelength"), Term("attenuator", "wavelength"))
_DARK_OVER_FLOOR = 10.0
"""A point is refused below ten times the floor, so darkness is what no point could be taken for."""
_ZERO_READINGS = 5
_COVERAGE = 3.0
"""A short averaging window scatters by more than the floor; that is no zero gone wrong."""


def light_up(bench: OpenBench, wanted: LightState) -> None:
    """Bias, attenuator maximum read back, local oscillator, signal; a power of None stays as it stands.

    A source that is not wanted is turned off: somebody may have left it on.
    """
    if bench.knows(BIAS):
        bench.set(BIAS, True)
    if bench.knows(ATTENUATION):
        bench.set(ATTENUATION, bench.paper.light_path.attenuator_maximum_db)
    _light_source(bench, LO_OUTPUT, wanted.lo_on, LO_POWER, wanted.lo_power_dbm)
    _light_source(bench, SIGNAL_OUTPUT, wanted.signal_on, SIGNAL_POWER, wanted.signal_power_dbm)


def _light_source(bench: OpenBench, output: Term, on: bool | None, power: Term, power_dbm: float | None) -> None:
    if not bench.knows(output):
        return
    if not on and getattr(bench.light, FIELDS[output]) is not False:
        bench.set(output, False)
    if power_dbm is not None:
        bench.set(power, power_dbm)
    if on:
        bench.set(output, True)


def make_dark(bench: OpenBench) -> None:
    """Attenuator maximum, then the sources off, each read back."""
    if bench.knows(ATTENUATION):
        bench.set(ATTENUATION, bench.paper.light_path.attenuator_maximum_db)
    for output in (SIGNAL_OUTPUT, LO_OUTPUT):
        if bench.knows(output):
            bench.set(output, False)


def set_wavelength(bench: OpenBench, signal_nm: float | None, lo_nm: float | None) -> None:
    """In the dark, both sources at once; meter and attenuator follow the signal. None stays as it stands.

    Light that was on comes on again behind the maximum. Where all stands as asked nothing is darkened.
    """
    if signal_nm is not None:
        _refuse_uncalibrated(bench, signal_nm)
    asked = dict.fromkeys(_FOLLOW_THE_SIGNAL, signal_nm) | {LO_WAVELENGTH: lo_nm}
    wanted = {term: nm for term, nm in asked.items() if nm is not None and bench.knows(term)}
    if all(bench.was_set(term, nm) for term, nm in wanted.items()):
        return
    was = bench.light
    make_dark(bench)
    for term, nm in wanted.items():
        bench.set(term, nm)
    # only what was proven to be on: unknown light is not lit again
    if bench.knows(LO_OUTPUT) and was.lo_on:
        bench.set(LO_OUTPUT, True)
    if bench.knows(SIGNAL_OUTPUT) and was.signal_on:
        bench.set(SIGNAL_OUTPUT, True)


def _refuse_uncalibrated(bench: OpenBench, wavelength_nm: float) -> None:
    record = bench.paper.plane_minus_tap
    if abs(wavelength_nm - record.wavelength_nm) > record.wavelength_span_nm:
        raise BenchError(
            f"The calibration of the power path holds at {words(record.wavelength_nm, 'nm')} within "
            f"{words(record.wavelength_span_nm, 'nm')}, not at {words(wavelength_nm, 'nm')}. "
            "Nothing was set; choose a wavelength inside, or calibrate the path there."
        )


def zero_meter(bench: OpenBench) -> None:
    """Forced and proven dark: sources read back off, the level below that of any point; then zero and look again."""
    make_dark(bench)
    wait_averaged(bench)
    floor_w = _floor_w(bench)
    dark = bench.read(METER, _ZERO_READINGS, "dark before zero").value
    if dark is None or abs(dark) > _DARK_OVER_FLOOR * floor_w:
        raise InstrumentError(
            f"The meter was not zeroed, because it is not dark: it reads {_level(dark)} with the sources off. "
            "The bench stays dark; look for light at the tap.",
            "power_meter",
        )
    bench.act_plainly(ZERO)
    wait_averaged(bench)
    left = bench.read(METER, _ZERO_READINGS, "dark after zero")
    scatter_w = (left.standard_deviation or 0.0) / math.sqrt(_ZERO_READINGS)
    if left.value is None or abs(left.value) > floor_w + _COVERAGE * scatter_w:
        raise InstrumentError(
            f"The meter still reads {_level(left.value)} in the dark after its zero, more than its floor. "
            "The bench stays dark; zero it by hand, or correct its floor in the bench file.",
            "power_meter",
        )


def wait_averaged(bench: OpenBench) -> None:
    """A full averaging window: until then a reading still holds light from before the change."""
    if not bench.knows(AVERAGING):
        return
    window_s = bench.stands(AVERAGING)
    if not isinstance(window_s, float):
        raise InstrumentError("The power meter does not tell its averaging window. Look at it.", "power_meter")
    bench.clock.sleep(window_s)


def _floor_w(bench: OpenBench) -> float:
    floor_dbm = bench.paper.role["power_meter"].floor_dbm
    if floor_dbm is None:
        raise BenchError("The bench file states no floor of the power meter, so darkness cannot be judged. State it.")
    return watts(floor_dbm)


def _level(power_w: float | None) -> str:
    return "not a number" if power_w is None else words(power_w, "W", 3)
