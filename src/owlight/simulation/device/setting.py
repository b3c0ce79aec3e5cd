"""One setting: what was asked, what became of it, and how far the light has followed."""

from __future__ import annotations

import math

from owlight import quantity
from owlight.simulation.device import parameters
from owlight.simulation.device.errors import DeviceError
from owlight.simulation.device.message import Parameter
from owlight.simulation.device.model import Plain, SettingFile

_HERTZ = {"HZ": 1.0, "GHZ": 1e9, "THZ": 1e12}


def _tidy(value: float) -> float:
    """Without the rounding of a change of unit in the last digits."""
    return float(f"{value:.13g}")


def canonical(name: str, spoken: float, unit: str) -> float:
    """What the optics count in: dBm, nm, dB, Hz.

    >>> canonical("power", 0.001, "W"), canonical("wavelength", 1.55012e-6, "M")
    (0.0, 1550.12)
    """
    if unit == "W" and name == "power":
        return quantity.dbm(spoken)
    if unit == "M":
        return _tidy(spoken * 1e9)
    if unit in _HERTZ:
        hertz = _tidy(spoken * _HERTZ[unit])
        return quantity.wavelength_nm(hertz) if name == "wavelength" else hertz
    if unit == "S" and name == "sample_rate":
        return _tidy(1.0 / spoken)
    return spoken


def spoken(name: str, value: float, unit: str) -> float:
    """The inverse of `canonical`.

    >>> spoken("power", 0.0, "W"), spoken("wavelength", 1550.12, "M")
    (0.001, 1.55012e-06)
    """
    if unit == "W" and name == "power":
        return quantity.watts(value)
    if unit == "M":
        return _tidy(value / 1e9)
    if unit in _HERTZ:
        return _tidy((quantity.optical_frequency_hz(value) if name == "wavelength" else value) / _HERTZ[unit])
    if unit == "S" and name == "sample_rate":
        return _tidy(1.0 / value)
    return value


class Setting:
    """Holds the value in the optics' unit. A number moves along a straight line; light switched on comes at the end."""

    def __init__(self, name: str, file: SettingFile) -> None:
        self.name = name
        self.file = file
        self._from: Plain = 0
        self._to: Plain = 0
        self._began_s = 0.0
        self.until_s = -math.inf
        self.jump(file.reset if file.power_up is None else file.power_up)

    def jump(self, plain: Plain) -> None:
        """To a value as the file has it, at once: that is how the power-up state is found."""
        self._from = self._to = self.meant(plain)
        self.until_s = -math.inf

    def meant(self, plain: Plain) -> Plain:
        """A spoken value in the optics' terms."""
        if self.file.type == "choice":
            place = self.file.choices.index(str(plain))
            return self.file.meanings[place] if self.file.meanings else str(plain)
        if self.file.type == "boolean":
            return bool(plain)
        if self.file.type == "integer":
            return int(plain)
        return canonical(self.name, float(plain) * self.file.per, self.file.unit)

    def move(self, plain: Plain, now_s: float) -> None:
        """Start towards a spoken value; the light is there after `settles`."""
        self._from, self._to = self.at(now_s), self.meant(plain)
        self._began_s = now_s
        self.until_s = now_s + self.file.settles_s

    @property
    def target(self) -> Plain:
        return self._to

    def at(self, moment_s: float) -> Plain:
        """Where the light stands at a moment."""
        if moment_s >= self.until_s or self._to == self._from:
            return self._to
        if moment_s < self._began_s:
            return self._from
        if isinstance(self._to, bool):
            return False  # on comes last, off comes first
        if isinstance(self._to, str) or isinstance(self._from, str):
            return self._from
        done = (moment_s - self._began_s) / self.file.settles_s
        return self._from + (self._to - self._from) * done

    def parse(self, parameter: Parameter, suffixes: bool) -> Plain:
        """The spoken value, within the type; ranges come after."""
        if self.file.type == "boolean" and self.file.choices:
            return bool(self.file.choices.index(parameters.choice(parameter, self.file.choices)))
        if self.file.type == "boolean":
            return parameters.boolean(parameter)
        if self.file.type == "choice":
            return parameters.choice(parameter, self.file.choices)
        if parameter.kind == "word":
            return self._keyword(parameter.text)
        value = parameters.in_unit(parameter, self.file.unit, suffixes)
        if self.file.type == "integer" and math.isfinite(value):
            return round(value)
        return value

    def _keyword(self, word: str) -> Plain:
        if word in ("NAN", "INF", "INFINITY", "NINF", "NINFINITY"):
            raise DeviceError(-222, f"{self.name} {word}")
        return self.limit(word)

    def limit(self, word: str) -> Plain:
        """MINimum, MAXimum, DEFault (SCPI-99 volume 1, 7.2.1)."""
        if word in ("DEF", "DEFAULT"):
            return self.file.reset
        end = {"MIN": self.file.lowest, "MINIMUM": self.file.lowest}
        end |= {"MAX": self.file.highest, "MAXIMUM": self.file.highest}
        value = end.get(word)
        if value is None:
            raise DeviceError(-224 if word not in end else -148, word)
        return round(value) if self.file.type == "integer" else value

    def within(self, plain: Plain) -> tuple[Plain, bool]:
        """The value that the instrument makes of it, and whether it was clipped; -222 where it refuses."""
        if self.file.type in ("boolean", "choice"):
            return plain, False
        value = float(plain)
        if self.file.values and value not in self.file.values:
            raise DeviceError(-224, f"{self.name} {value:g}")
        low = -math.inf if self.file.lowest is None else self.file.lowest
        high = math.inf if self.file.highest is None else self.file.highest
        clipped = min(max(value, low), high)
        if not math.isfinite(clipped) or (clipped != value and self.file.beyond == "refuse"):
            raise DeviceError(-222, f"{self.name} {value:g}")
        if self.file.grid:
            clipped = _tidy(round(clipped / self.file.grid) * self.file.grid)
        return (int(clipped) if self.file.type == "integer" else clipped), clipped != value

    def shown(self, now_s: float) -> Plain:
        """The value as it is read back."""
        value = self.at(now_s) if self.file.reads_back == "actual" else self._to
        if self.file.type == "choice":
            place = self.file.meanings.index(str(value)) if self.file.meanings else -1
            return self.file.choices[place] if self.file.meanings else str(value)
        if self.file.type != "number":
            return value
        return spoken(self.name, float(value), self.file.unit) / self.file.per
