"""The transmitted signal and the settings that follow from it."""

from __future__ import annotations

from collections.abc import Iterator

from owlight.errors import InputError
from owlight.modulation import spread_offsets
from owlight.sequence import Sequence
from owlight.vocabulary.plan import CaptureRequest, Signal
from owlight.vocabulary.terms import LO_POWER, RECEIVED_POWER
from owlight.vocabulary.values import Setting, Term, Value

_SOURCES = ("signal_laser", "local_oscillator")


def signal_of(sequence: Sequence) -> Signal:
    """The signal with its tributary offsets settled."""
    table = sequence.signal
    if table is None:
        raise InputError("The sequence has no [signal]. Add it, or leave out what needs a signal.")
    offsets = table.pattern.tributary_offsets
    settled = spread_offsets(table.pattern.order, 2 * table.polarisations) if offsets == "spread" else offsets
    return Signal(
        modulation=table.modulation,
        symbol_rate_bd=table.symbol_rate_bd,
        polarisations=table.polarisations,
        pulse_shape=table.pulse.shape,
        rolloff=table.pulse.rolloff,
        pattern_order=table.pattern.order,
        tributary_offsets=tuple(int(offset) for offset in settled),
    )


def all_settings(sequence: Sequence, signal: Signal | None, capture: CaptureRequest | None) -> tuple[Setting, ...]:
    """What is applied once: first what needs no light, then wavelengths, powers, and last the outputs of sources."""
    derived = [*_pattern_settings(signal)] if signal else []
    if capture is not None:
        derived.append(Setting(Term("oscilloscope", "sample_rate"), capture.sample_rate_hz))
        derived.append(Setting(Term("oscilloscope", "record_length"), capture.record_length))
    return tuple(sorted((*derived, *sequence.settings), key=_rank))


def _pattern_settings(signal: Signal) -> Iterator[Setting]:
    values: dict[str, Value] = {
        "modulation": signal.modulation,
        "symbol_rate": signal.symbol_rate_bd,
        "polarisations": signal.polarisations,
        "rolloff": signal.rolloff,
        "pattern_order": signal.pattern_order,
    }
    values |= {f"offset_{lane}": offset for lane, offset in enumerate(signal.tributary_offsets, 1)}
    values["output"] = True
    for name, value in values.items():
        yield Setting(Term("pattern_source", name), value)


def _rank(setting: Setting) -> int:
    term = setting.term
    if term in (LO_POWER, RECEIVED_POWER):
        return 4
    if term.role in _SOURCES:
        return {"wavelength": 2, "power": 3, "output": 5}[term.name]
    return 1 if term.name == "wavelength" else 0
