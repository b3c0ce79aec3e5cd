"""The table of terms: what can be set, read and done on a bench, its unit, and what it means.

The unit of a term stands here and nowhere else. `kind`: "setting" (set and read back), "reading" (only read),
"action" (something an instrument does), "quantity" (a bench quantity, found by the bench from calibration and tap).
`type` is float, int, bool or str.
"""

from __future__ import annotations

from dataclasses import dataclass

from owlight.vocabulary.values import Term


@dataclass(frozen=True)
class TermInfo:
    kind: str
    type: type
    unit: str
    meaning: str


ROLES: dict[str, str] = {
    "signal_laser": "the laser that carries the data",
    "local_oscillator": "the laser that the signal beats against",
    "attenuator": "the optical attenuator that steers the received power",
    "power_meter": "the optical power meter on the tap",
    "pattern_source": "the pattern source with the modulator it drives",
    "oscilloscope": "the oscilloscope that digitises the receiver's lanes",
    "receiver": "the receiver's bias, gain and monitor readings",
}

_LASER = {
    "output": TermInfo("setting", bool, "", "emission on or off"),
    "power": TermInfo("setting", float, "dBm", "output power of the laser"),
    "wavelength": TermInfo("setting", float, "nm", "vacuum wavelength"),
}
_BY_ROLE: dict[str, dict[str, TermInfo]] = {
    "signal_laser": _LASER,
    "local_oscillator": _LASER,
    "attenuator": {
        "attenuation": TermInfo("setting", float, "dB", "loss added; more decibels, less light"),
        "wavelength": TermInfo("setting", float, "nm", "wavelength its calibration is used at"),
    },
    "power_meter": {
        "power": TermInfo("reading", float, "W", "average optical power at the meter; may be negative in the dark"),
        "wavelength": TermInfo("setting", float, "nm", "wavelength its responsivity is used at"),
        "averaging_time": TermInfo("setting", float, "s", "averaging window of one reading"),
        "zero": TermInfo("action", str, "", "zero the meter; only in proven dark"),
    },
    "pattern_source": {
        "output": TermInfo("setting", bool, "", "drive of the modulator on or off"),
        "modulation": TermInfo("setting", str, "", "format of the symbols, for example QPSK"),
        "symbol_rate": TermInfo("setting", float, "Bd", "symbols a second"),
        "polarisations": TermInfo("setting", int, "", "1 or 2"),
        "rolloff": TermInfo("setting", float, "", "roll-off of the root-raised-cosine pulse"),
        "pattern_order": TermInfo("setting", int, "", "order of the maximal-length pattern"),
        "offset_1": TermInfo("setting", int, "", "pattern offset of tributary XI in bits"),
        "offset_2": TermInfo("setting", int, "", "pattern offset of tributary XQ in bits"),
        "offset_3": TermInfo("setting", int, "", "pattern offset of tributary YI in bits"),
        "offset_4": TermInfo("setting", int, "", "pattern offset of tributary YQ in bits"),
    },
    "oscilloscope": {
        "sample_rate": TermInfo("setting", float, "Hz", "samples a second in each lane"),
        "record_length": TermInfo("setting", int, "", "samples a lane in one record"),
        "range_1": TermInfo("setting", float, "V", "full vertical range of lane 1, peak to peak"),
        "range_2": TermInfo("setting", float, "V", "full vertical range of lane 2, peak to peak"),
        "range_3": TermInfo("setting", float, "V", "full vertical range of lane 3, peak to peak"),
        "range_4": TermInfo("setting", float, "V", "full vertical range of lane 4, peak to peak"),
        "coupling": TermInfo("setting", str, "", "AC or DC, all lanes"),
        "record": TermInfo("action", str, "", "arm, wait and fetch one record of all lanes"),
    },
    "receiver": {
        "bias": TermInfo("setting", bool, "", "photodiode bias on or off; on before light"),
        "gain": TermInfo("setting", float, "dB", "gain of the lane amplifiers against their nominal gain"),
        "gain_control": TermInfo("setting", str, "", "manual or automatic"),
        "photocurrent": TermInfo("reading", float, "A", "sum of the photodiode currents"),
        "damaged": TermInfo("reading", float, "", "number of photodiodes that report damage"),
    },
    "bench": {
        "received_power": TermInfo(
            "quantity", float, "dBm", "total average signal power at the reference plane, local oscillator excluded"
        ),
        "lo_power": TermInfo("quantity", float, "dBm", "local oscillator power at the receiver's LO port"),
    },
}

TERMS: dict[Term, TermInfo] = {
    Term(role, name): info for role, terms in _BY_ROLE.items() for name, info in terms.items()
}

RECEIVED_POWER = Term("bench", "received_power")
LO_POWER = Term("bench", "lo_power")


def term_of(text: str) -> Term:
    """The term that a file spells `role.name`, or `name` alone for a bench quantity; KeyError if there is none.

    >>> term_of("signal_laser.power"), term_of("received_power")
    (Term(role='signal_laser', name='power'), Term(role='bench', name='received_power'))
    """
    role, _, name = text.rpartition(".")
    term = Term(role or "bench", name)
    if term not in TERMS:
        raise KeyError(text)
    return term
