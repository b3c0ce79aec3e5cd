"""What is proven of the light, and the refusal of any setting that could break a damage limit."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

from owlight.bench import Bench, LightState, as_it_shines, refuse_if_over
from owlight.errors import SafetyRefusal
from owlight.vocabulary.values import Term, Value

SIGNAL_OUTPUT = Term("signal_laser", "output")
SIGNAL_POWER = Term("signal_laser", "power")
LO_OUTPUT = Term("local_oscillator", "output")
LO_POWER = Term("local_oscillator", "power")
ATTENUATION = Term("attenuator", "attenuation")
BIAS = Term("receiver", "bias")
FIELDS = {
    SIGNAL_OUTPUT: "signal_on",
    SIGNAL_POWER: "signal_power_dbm",
    LO_OUTPUT: "lo_on",
    LO_POWER: "lo_power_dbm",
    ATTENUATION: "attenuation_db",
}


class LightKeeper:
    """A value that was commanded but not read back is unknown, and unknown counts as the worst."""

    def __init__(self, bench: Bench) -> None:
        self._bench = bench
        self.state = LightState()

    def judge(self, term: Term, value: Value, point: int | None = None, closed: bool = False) -> None:
        """Before a setting: SafetyRefusal if it could exceed a limit. What darkens is never refused.

        `closed`: as it would stand with the attenuator at its maximum, where it is put before power goes up.
        """
        if term == BIAS and not value and self.lit:
            raise SafetyRefusal(
                "The receiver's bias must stay on while light could reach its photodiodes. "
                "Nothing was set; turn the sources off first."
            )
        if term in FIELDS and not self._darkens(term, value):
            state = self._with(term, value)
            if closed:
                state = replace(state, attenuation_db=self._bench.light_path.attenuator_maximum_db)
            refuse_if_over(self._bench, state, point)

    @property
    def lit(self) -> bool:
        return self.state.signal_on is not False or self.state.lo_on is not False

    def brightens(self, term: Term, value: Value, tolerance: float) -> bool:
        """Whether more light could come out than now; a source proven off and an attenuator before it give none."""
        if term not in FIELDS:
            return False
        stands = getattr(self.state, FIELDS[term])
        if isinstance(value, bool):
            return value and stands is not True
        shines = as_it_shines(self._bench, self.state)
        lit = shines.lo_on if term == LO_POWER else shines.signal_on
        if lit is False:
            return False
        if term == ATTENUATION:
            stands = self._bench.light_path.attenuator_maximum_db if stands is None else stands
            return float(value) < stands - tolerance
        return stands is None or float(value) > stands + tolerance

    def _darkens(self, term: Term, value: Value) -> bool:
        stands = getattr(self.state, FIELDS[term])
        if isinstance(value, bool):
            return not value
        if term == ATTENUATION:
            least_db = self._bench.light_path.attenuator_maximum_db if stands is None else stands
            return float(value) >= least_db
        return stands is not None and float(value) <= stands

    def forget(self, term: Term) -> None:
        self.learn(term, None)

    def learn(self, term: Term, read_back: Value | None) -> None:
        """An infinite level is as good as none: unknown, and so the worst."""
        if term in FIELDS:
            unknown = isinstance(read_back, float) and not math.isfinite(read_back)
            self.state = self._with(term, None if unknown else read_back)

    def _with(self, term: Term, value: Value | None) -> LightState:
        changed: dict[str, Any] = {FIELDS[term]: value}
        return replace(self.state, **changed)
