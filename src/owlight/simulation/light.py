"""The one light that all instruments of the bench share: what they make of it now, and what it has done.

The past matters twice: a power meter averages over it, and a photodiode that was once overdriven stays damaged.
"""

from __future__ import annotations

from collections import Counter, deque
from collections.abc import Iterator, Mapping
from dataclasses import dataclass

from owlight.simulation.device.bench_time import BenchTime
from owlight.simulation.device.instrument import Instrument
from owlight.simulation.device.model import Plain
from owlight.simulation.device.status import HARDWARE_FAULT
from owlight.simulation.optics import LightSettings
from owlight.simulation.physics import Physics
from owlight.vocabulary.seeds import seed_for

_STEPS_OF_A_MOVE = 4
_REMEMBERED_S = 60.0  # longer than any averaging window
_FIELDS = {
    "signal_on": ("signal_laser", "output"),
    "signal_power_dbm": ("signal_laser", "power"),
    "signal_wavelength_nm": ("signal_laser", "wavelength"),
    "lo_on": ("local_oscillator", "output"),
    "lo_power_dbm": ("local_oscillator", "power"),
    "lo_wavelength_nm": ("local_oscillator", "wavelength"),
    "attenuation_db": ("attenuator", "attenuation"),
    "drive_on": ("pattern_source", "output"),
    "modulation": ("pattern_source", "modulation"),
    "symbol_rate_bd": ("pattern_source", "symbol_rate"),
    "polarisations": ("pattern_source", "polarisations"),
    "rolloff": ("pattern_source", "rolloff"),
    "pattern_order": ("pattern_source", "pattern_order"),
    "sample_rate_hz": ("oscilloscope", "sample_rate"),
    "record_length": ("oscilloscope", "record_length"),
    "coupling": ("oscilloscope", "coupling"),
    "bias": ("receiver", "bias"),
    "gain_db": ("receiver", "gain"),
    "gain_control": ("receiver", "gain_control"),
}
_FOUR = {"offsets": ("pattern_source", "offset"), "ranges_v": ("oscilloscope", "range")}


@dataclass(frozen=True)
class _Stretch:
    """A time in which nothing moved, or moved so little that its middle stands for it."""

    from_s: float
    to_s: float
    settings: LightSettings


class SharedLight:
    """Everything here is called with the bench's lock held."""

    def __init__(self, physics: Physics, instruments: Mapping[str, Instrument], time: BenchTime) -> None:
        self.physics = physics
        self.instruments = instruments
        self.time = time
        for instrument in instruments.values():
            instrument.before_change = self.catch_up
            instrument.after_change = self.look
        self.start_again()

    def start_again(self) -> None:
        """A bench fresh from the maker: no past, no damage."""
        self._past: deque[_Stretch] = deque()
        self._seen_s = self.time.now_s()
        self.damaged: frozenset[str] = frozenset()
        self.highest_diode_power_w = 0.0
        self._seed = 0
        self._planned_s: float | None = None
        self._used: Counter[str] = Counter()
        self.look()

    # ---- keys of the noise ----

    def next_capture(self, seed: int, planned_time_s: float) -> None:
        """From now on captures and readings are keyed by this, counted anew."""
        self._seed, self._planned_s = seed, planned_time_s
        self._used.clear()

    def key(self, purpose: str) -> int:
        """A new key for one capture or reading."""
        self._used[purpose] += 1
        return seed_for(self._seed, purpose, self._used[purpose])

    def planned_time_s(self) -> float:
        """What slow drift follows; without a plan, the time that has passed."""
        return self.time.now_s() if self._planned_s is None else self._planned_s

    # ---- now ----

    def at(self, moment_s: float) -> LightSettings:
        """What the light follows at a moment, somewhere between two settings while an instrument moves."""

        def value(place: tuple[str, str], number: int = 1) -> Plain:
            role, name = place
            return self.instruments[role].value_at(name, moment_s, number)

        fields: dict[str, object] = {field: value(place) for field, place in _FIELDS.items()}
        fields |= {field: tuple(value(place, lane) for lane in (1, 2, 3, 4)) for field, place in _FOUR.items()}
        return LightSettings(**fields)  # type: ignore[arg-type]

    def now(self) -> LightSettings:
        self.catch_up()
        return self.at(self.time.now_s())

    # ---- the past ----

    def catch_up(self) -> None:
        """Let the light have passed until now under the settings that stand."""
        now_s = self.time.now_s()
        for from_s, to_s in self._stretches(self._seen_s, now_s):
            self._remember(_Stretch(from_s, to_s, self.at((from_s + to_s) / 2)))
            self._expose(self.at(to_s))
        self._seen_s = now_s
        while self._past and self._past[0].to_s < now_s - _REMEMBERED_S:
            self._past.popleft()

    def look(self) -> None:
        """The light right after a change."""
        self._expose(self.at(self.time.now_s()))

    def _stretches(self, from_s: float, to_s: float) -> Iterator[tuple[float, float]]:
        settings = [setting for instrument in self.instruments.values() for setting in instrument.settings.values()]
        ends = sorted({setting.until_s for setting in settings if from_s < setting.until_s < to_s} | {to_s})
        for end in ends:
            moving = any(setting.until_s >= end > from_s for setting in settings)
            steps = _STEPS_OF_A_MOVE if moving else 1
            length_s = (end - from_s) / steps
            if length_s > 0.0:
                yield from ((from_s + step * length_s, from_s + (step + 1) * length_s) for step in range(steps))
            from_s = end

    def _remember(self, stretch: _Stretch) -> None:
        last = self._past[-1] if self._past else None
        if last is not None and last.settings == stretch.settings:
            self._past[-1] = _Stretch(last.from_s, stretch.to_s, stretch.settings)
        else:
            self._past.append(stretch)

    def _expose(self, settings: LightSettings) -> None:
        """The power of a ramp is highest at one of its ends, so looking there misses no crest."""
        peak_w = self.physics.diode_peak_power_w(settings)
        self.highest_diode_power_w = max(self.highest_diode_power_w, peak_w)
        newly = self.physics.damaged_by(peak_w) - self.damaged
        if newly:
            self.damaged |= newly
            receiver = self.instruments["receiver"].status
            receiver.questionable.change(HARDWARE_FAULT, True)
            receiver.queue.push(-240, f"photodiode of {' '.join(sorted(newly))} overdriven")

    # ---- what instruments see ----

    def meter_power_w(self, averaging_s: float) -> float:
        """The mean over the window that ends now: light of before a change is still in it."""
        self.catch_up()
        now_s = self.time.now_s()
        key, planned_s = self.key("power_meter"), self.planned_time_s()
        seen = [(min(s.to_s, now_s) - max(s.from_s, now_s - averaging_s), s.settings) for s in self._past]
        seen = [(weight_s, settings) for weight_s, settings in seen if weight_s > 1e-12]
        if not seen:
            seen = [(1.0, self.at(now_s))]
        whole_s = sum(weight_s for weight_s, _ in seen)
        powers = (
            weight_s / whole_s * self.physics.meter_power_w(settings, key, planned_s, averaging_s)
            for weight_s, settings in seen
        )
        return sum(powers)

    def photocurrent_a(self) -> float:
        return self.physics.photocurrent_a(self.now(), self.key("photocurrent"), self.planned_time_s())

    def record(self) -> tuple[bytes, ...]:
        """One record of the four lanes as bytes of 8-bit codes."""
        codes = self.physics.capture_codes(self.now(), self.key("capture"), self.planned_time_s(), self.damaged)
        return tuple(lane.tobytes() for lane in codes)

    def truth(self) -> dict[str, object]:
        """What only a test may know."""
        settings = self.now()
        return {
            "receiver_power_w": self.physics.receiver_power_w(settings, self.planned_time_s()),
            "diode_peak_power_w": self.physics.diode_peak_power_w(settings),
            "highest_diode_power_w": self.highest_diode_power_w,
            "damaged": sorted(self.damaged),
        }
