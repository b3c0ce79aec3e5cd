"""Light on paper: what arrives where, what could at worst, and the order that makes it dark."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, replace

from owlight.bench.model import LO_INPUT, METER, PHOTODIODE, SIGNAL_INPUT, Bench
from owlight.errors import SafetyRefusal
from owlight.quantity import dbm, watts, words
from owlight.vocabulary.plan import PlanePower
from owlight.vocabulary.terms import TERMS
from owlight.vocabulary.values import Setting, Term

_HYBRID_OUTPUTS = 4
"""A 90 degree hybrid spreads each input over four diodes."""


@dataclass(frozen=True)
class LightState:
    """What is known of the sources and the attenuator; None is unknown and counts as the worst."""

    signal_on: bool | None = None
    signal_power_dbm: float | None = None
    lo_on: bool | None = None
    lo_power_dbm: float | None = None
    """Output of the local oscillator laser, not the power at the receiver's port."""
    attenuation_db: float | None = None


def worst_case(bench: Bench, state: LightState, point: int | None = None) -> tuple[PlanePower, ...]:
    """The highest power at each plane light could reach: upper tolerance of the sources, least loss of the path."""
    state = as_it_shines(bench, state)
    powers_dbm = _powers_dbm(bench, state)
    return tuple(
        PlanePower(plane, _situation(bench, state), power_dbm, bench.limit[plane].highest_dbm, point)
        for plane, power_dbm in powers_dbm.items()
    )


def as_it_shines(bench: Bench, state: LightState) -> LightState:
    """The state itself, but where one laser serves both roles: then either role lights both, at the worse power."""
    if not _is_one_laser(bench):
        return state
    outputs = (state.signal_on, state.lo_on)
    powers = (state.signal_power_dbm, state.lo_power_dbm)
    on = True if True in outputs else None if None in outputs else False
    power_dbm = None if None in powers else max(power for power in powers if power is not None)
    return replace(state, signal_on=on, lo_on=on, signal_power_dbm=power_dbm, lo_power_dbm=power_dbm)


def _is_one_laser(bench: Bench) -> bool:
    signal, lo = bench.role.get("signal_laser"), bench.role.get("local_oscillator")
    if signal is None or lo is None:
        return False
    if signal.serial_number and lo.serial_number:
        return signal.serial_number == lo.serial_number
    return signal.resource == lo.resource and not signal.resource.startswith("simulated ")


def _powers_dbm(bench: Bench, state: LightState) -> dict[str, float]:
    path = bench.light_path
    powers: dict[str, float] = {}
    signal_dbm = _source_dbm(bench, "signal_laser", state.signal_on, state.signal_power_dbm)
    lo_dbm = _source_dbm(bench, "local_oscillator", state.lo_on, state.lo_power_dbm)
    if signal_dbm is not None:
        attenuation_db = _least_attenuation_db(bench, state.attenuation_db)
        fixed_db = path.transmitter_least_loss_db + path.fixed_pad_db + path.attenuator_insertion_least_db
        at_tap_dbm = signal_dbm - fixed_db - attenuation_db
        powers[SIGNAL_INPUT] = at_tap_dbm - path.tap_to_receiver_least_loss_db
        powers[METER] = at_tap_dbm - path.tap_to_meter_least_loss_db
    if lo_dbm is not None:
        powers[LO_INPUT] = lo_dbm - path.lo_least_loss_db
    if powers:
        powers[PHOTODIODE] = _diode_dbm(bench, powers.get(SIGNAL_INPUT), powers.get(LO_INPUT))
    return powers


def _least_attenuation_db(bench: Bench, attenuation_db: float | None) -> float:
    """Below 0 dB only for a received power that no attenuator gives: then the limit is still judged for it."""
    if attenuation_db is None:
        return 0.0
    return max(attenuation_db - bench.light_path.attenuator_accuracy_db, min(attenuation_db, 0.0))


def _source_dbm(bench: Bench, name: str, on: bool | None, power_dbm: float | None) -> float | None:
    role = bench.role.get(name)
    if on is False or role is None:
        return None
    highest_dbm = role.highest_power_dbm or 0.0
    return (highest_dbm if power_dbm is None else power_dbm) + (role.power_tolerance_db or 0.0)


def _diode_dbm(bench: Bench, signal_dbm: float | None, lo_dbm: float | None) -> float:
    """Fields add, not powers: at the crest of the beat a diode sees (sqrt(P_lo) + sqrt(P_s))^2.

    All the signal may lie in one polarisation; the local oscillator is split evenly. A lossless hybrid is the worst.
    """
    signal_w = 0.0 if signal_dbm is None else watts(signal_dbm) / _HYBRID_OUTPUTS
    lo_w = 0.0 if lo_dbm is None else watts(lo_dbm) / (_HYBRID_OUTPUTS * max(bench.receiver.polarisations, 1))
    return dbm((math.sqrt(signal_w) + math.sqrt(lo_w)) ** 2)


def _situation(bench: Bench, state: LightState) -> str:
    signal = _source_words("signal", state.signal_on, state.signal_power_dbm)
    lo = _source_words("local oscillator", state.lo_on, state.lo_power_dbm)
    return f"{signal}, {lo}, {_attenuator_words(state.attenuation_db, bench.light_path.attenuator_maximum_db)}"


def _attenuator_words(attenuation_db: float | None, maximum_db: float) -> str:
    """No attenuator goes below 0 dB nor beyond its end, whatever received power is asked for."""
    if attenuation_db is None:
        return "attenuator unknown, taken as 0 dB"
    if attenuation_db < 0.0:
        return f"attenuator at 0.00 dB and {-attenuation_db:.2f} dB more light asked for than it would pass"
    return f"attenuator at {min(attenuation_db, maximum_db):.2f} dB"


def _source_words(name: str, on: bool | None, power_dbm: float | None) -> str:
    if on is False:
        return f"{name} off"
    return f"{name} unknown, taken as its highest" if power_dbm is None else f"{name} at {power_dbm:.2f} dBm"


def refuse_if_over(bench: Bench, state: LightState, point: int | None = None, asked: Iterable[Setting] = ()) -> None:
    """SafetyRefusal that names planes, limits, powers and what a point `asked`; only another bench file lifts it."""
    over = [power for power in worst_case(bench, state, point) if _is_over(power)]
    if not over:
        return
    planes = "; ".join(
        f"the {power.plane} could see {power.power_dbm:.2f} dBm, above its limit of {power.limit_dbm:.2f} dBm"
        for power in over
    )
    settings = ", ".join(f"{each.term} {_value_words(each)}" for each in asked)
    where = "" if point is None else f"Point {point}" + (f" ({settings})" if settings else "") + ": "
    raise SafetyRefusal(
        f"{where}{planes} ({over[0].situation}; sources at their upper tolerance, least loss). "
        "Nothing was set. Ask for less power, or add loss and say so in the bench file."
    )


def _value_words(setting: Setting) -> str:
    value = setting.value
    return words(value, TERMS[setting.term].unit) if isinstance(value, float) else str(value)


def _is_over(power: PlanePower) -> bool:
    # a limit that is just reached is kept; the margin is rounding
    return power.power_dbm > power.limit_dbm + 1e-9


def fixed_pad_words(bench: Bench, state: LightState) -> str:
    """Advice where an attenuator at 0 dB, as after a reset, could exceed a limit; empty where none is exceeded."""
    over = _over(bench, replace(state, attenuation_db=0.0))
    if not over:
        return ""
    accuracy_db = bench.light_path.attenuator_accuracy_db
    enough = (pad for pad in range(1, 101) if not _over(bench, replace(state, attenuation_db=pad + accuracy_db)))
    pad_db = next(enough, None)
    cure = "less local oscillator power is needed" if pad_db is None else f"fit a fixed pad of at least {pad_db} dB"
    return f"with the attenuator at 0 dB the limit could be exceeded at: {', '.join(over)}; {cure}"


def _over(bench: Bench, state: LightState) -> list[str]:
    return [power.plane for power in worst_case(bench, state) if _is_over(power)]


def attenuation_for(bench: Bench, received_power_dbm: float, signal_power_dbm: float) -> float:
    """The attenuation expected to give this received power; it only steers, the tap measures."""
    path = bench.light_path
    fixed_db = path.transmitter_loss_db + path.fixed_pad_db + path.attenuator_insertion_db
    return signal_power_dbm - fixed_db - path.tap_to_receiver_loss_db - received_power_dbm


def lo_laser_power_dbm(bench: Bench, lo_power_dbm: float) -> float:
    """The laser's output that is expected to give this power at the receiver's LO port."""
    return lo_power_dbm + bench.light_path.lo_loss_db


def safe_settings(bench: Bench) -> tuple[tuple[str, Setting], ...]:
    """Darkness in the order that needs no success of the step before; the receiver's bias stays on."""
    steps = (
        Setting(Term("attenuator", "attenuation"), bench.light_path.attenuator_maximum_db),
        Setting(Term("signal_laser", "output"), False),
        Setting(Term("local_oscillator", "output"), False),
    )
    return tuple((step.term.role, step) for step in steps if step.term.role in bench.role)
