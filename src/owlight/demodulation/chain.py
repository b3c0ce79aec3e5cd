"""A demodulation chain as text: everything that decides a result, so that its hash stands for it.

Light on purpose: a forecast reads it, and no kernel or signal library is loaded.
"""

from __future__ import annotations

import dataclasses
import difflib
import hashlib
import json
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from typing import Any

from owlight.errors import InputError, Problem
from owlight.vocabulary.plan import ChainText, Signal

FORMAT_VERSION = 1
POLARISATIONS = {"single polarisation": 1, "dual polarisation": 2}
FORMATS = ("QPSK",)
Override = float | int | str | bool


@dataclass(frozen=True)
class LaneBelief:
    """What the bench believes of a lane; `skew_s` is how much later than the others its signal arrives."""

    name: str
    skew_s: float
    inverted: bool


@dataclass(frozen=True)
class ScalingSettings:
    """`remove_mean`: take each lane's average away; it is the residue of imperfect balance, not signal."""

    remove_mean: bool = True


@dataclass(frozen=True)
class DeskewSettings:
    """`believed`: apply the bench's skews. `residual`: "report" what is seen beyond them, or "correct" it too.

    Only what is significant is corrected, by the training symbols, of which none is counted.
    """

    believed: bool = True
    residual: str = "correct"


@dataclass(frozen=True)
class OrthonormalisationSettings:
    on: bool = True


@dataclass(frozen=True)
class MatchedFilterSettings:
    """Blocks of `block_samples` at two a symbol, of which `overlap_samples` are dropped.

    `centre`: find the coarse frequency offset first and filter there.
    """

    block_samples: int = 4096
    overlap_samples: int = 256
    centre: bool = True


@dataclass(frozen=True)
class ClockRecoverySettings:
    on: bool = True
    largest_offset_ppm: float = 150.0


@dataclass(frozen=True)
class EqualiserSettings:
    """Taps are half a symbol apart. The head of every `refresh_symbols` trains on decisions and is not counted."""

    taps: int = 15
    blind_symbols: int = 16384
    training_symbols: int = 24576
    refresh_symbols: int = 131072
    refresh_training_symbols: int = 8192
    step: float = 2e-3
    ridge: float = 1e-4


@dataclass(frozen=True)
class FrequencyOffsetSettings:
    on: bool = True


@dataclass(frozen=True)
class CarrierPhaseSettings:
    """Each symbol's phase comes from the `window_symbols` around it in all polarisations, never from itself."""

    window_symbols: int = 128


@dataclass(frozen=True)
class SynchronisationSettings:
    """No lock below `least_peak` or below `least_margin` times the next best alignment."""

    least_peak: float = 0.3
    least_margin: float = 3.0
    lag_tolerance_symbols: int = 16
    permute_lanes: bool = True


@dataclass(frozen=True)
class CountingSettings:
    slip_block_symbols: int = 1024


@dataclass(frozen=True)
class StageSettings:
    """Every stage's parameters, in the order of the chain."""

    scaling: ScalingSettings = field(default_factory=ScalingSettings)
    deskew: DeskewSettings = field(default_factory=DeskewSettings)
    orthonormalisation: OrthonormalisationSettings = field(default_factory=OrthonormalisationSettings)
    matched_filter: MatchedFilterSettings = field(default_factory=MatchedFilterSettings)
    clock_recovery: ClockRecoverySettings = field(default_factory=ClockRecoverySettings)
    equaliser: EqualiserSettings = field(default_factory=EqualiserSettings)
    frequency_offset: FrequencyOffsetSettings = field(default_factory=FrequencyOffsetSettings)
    carrier_phase: CarrierPhaseSettings = field(default_factory=CarrierPhaseSettings)
    synchronisation: SynchronisationSettings = field(default_factory=SynchronisationSettings)
    counting: CountingSettings = field(default_factory=CountingSettings)


STAGES = tuple(f.name.replace("_", " ") for f in dataclasses.fields(StageSettings))


@dataclass(frozen=True)
class Chain:
    """A chain as it runs; `from_text` and `make_chain` are inverse to each other."""

    name: str
    signal: Signal
    lanes: tuple[LaneBelief, ...]
    stages: StageSettings
    sha256: str

    @classmethod
    def from_text(cls, text: str) -> Chain:
        """The chain that `make_chain` wrote down.

        >>> signal = Signal("QPSK", 32e9, 1, "root raised cosine", 0.1, 15, ())
        >>> lanes = (LaneBelief("I", 0.0, False), LaneBelief("Q", 0.0, False))
        >>> Chain.from_text(make_chain("single polarisation", signal, lanes, None).text).signal == signal
        True
        """
        read = json.loads(text)
        if read.get("format_version") != FORMAT_VERSION:
            raise InputError(f"This chain has format version {read.get('format_version')}, not {FORMAT_VERSION}.")
        signal = {**read["signal"], "tributary_offsets": tuple(read["signal"]["tributary_offsets"])}
        kinds = {f.name: f.default_factory for f in dataclasses.fields(StageSettings)}
        stages = {name: kinds[name](**values) for name, values in read["stages"].items()}  # type: ignore[operator]
        return cls(
            name=read["chain"],
            signal=Signal(**signal),
            lanes=tuple(LaneBelief(**lane) for lane in read["lanes"]),
            stages=StageSettings(**stages),
            sha256=_sha256(text),
        )


def make_chain(
    name: str,
    signal: Signal,
    lanes: tuple[LaneBelief, ...],
    overrides: Mapping[str, Mapping[str, Override]] | None,
) -> ChainText:
    """The named chain with its overrides as canonical text; InputError lists everything that does not fit.

    >>> signal = Signal("QPSK", 32e9, 1, "root raised cosine", 0.1, 15, ())
    >>> lanes = (LaneBelief("I", 0.0, False), LaneBelief("Q", 0.0, False))
    >>> one = make_chain("single polarisation", signal, lanes, None)
    >>> two = make_chain("single polarisation", signal, lanes, {"equaliser": {"taps": 21}})
    >>> one.sha256 == two.sha256
    False
    """
    stages = StageSettings()
    problems = [*_misfits(name, signal, lanes)]
    for stage, values in (overrides or {}).items():
        found = _overridden(stages, stage, values)
        if isinstance(found, StageSettings):
            stages = found
        else:
            problems += found
    if problems:
        raise InputError("This demodulation cannot be made.", tuple(problems))
    whole = {
        "chain": name,
        "format_version": FORMAT_VERSION,
        "lanes": [dataclasses.asdict(lane) for lane in lanes],
        "signal": dataclasses.asdict(signal),
        "stages": dataclasses.asdict(stages),
    }
    text = json.dumps(whole, sort_keys=True, separators=(",", ":"))
    return ChainText(name, text, _sha256(text))


def _sha256(text: str) -> str:
    return hashlib.sha256(text.encode()).hexdigest()


def _problem(key: str, words: str) -> Problem:
    return Problem("demodulation", None, key, words)


def _misfits(name: str, signal: Signal, lanes: tuple[LaneBelief, ...]) -> Iterator[Problem]:
    if name not in POLARISATIONS:
        yield _problem("chain", f"there is no chain {name!r}; the known ones are {', '.join(POLARISATIONS)}")
    elif POLARISATIONS[name] != signal.polarisations:
        yield _problem("chain", f"{name!r} does not fit a signal of {signal.polarisations} polarisations")
    if signal.modulation not in FORMATS:
        yield _problem("modulation", f"{signal.modulation!r} cannot be demodulated yet; use {', '.join(FORMATS)}")
    if len(lanes) not in (2, 4) or len(lanes) < 2 * signal.polarisations:
        yield _problem("lanes", f"{len(lanes)} lanes cannot carry {signal.polarisations} polarisations; give two each")
    if signal.tributary_offsets and len(signal.tributary_offsets) < 2 * signal.polarisations:
        yield _problem("tributary_offsets", "one offset a tributary is needed, two a polarisation")


def _overridden(stages: StageSettings, stage: str, values: Mapping[str, Override]) -> StageSettings | list[Problem]:
    """The settings with one stage's overrides, or what is wrong with them."""
    if stage not in STAGES:
        return [_problem(f"stage.{stage}", f"there is no such stage;{_near(stage, STAGES)} known: {', '.join(STAGES)}")]
    home = stage.replace(" ", "_")
    settings: Any = getattr(stages, home)
    defaults = dataclasses.asdict(settings)
    problems, taken = [], {}
    for key, value in values.items():
        if key not in defaults:
            words = f"there is no such setting;{_near(key, defaults)} known: {', '.join(defaults)}"
            problems.append(_problem(f"stage.{stage}.{key}", words))
        elif (wrong := _wrong(key, value, defaults[key])) is not None:
            problems.append(_problem(f"stage.{stage}.{key}", wrong))
        else:
            taken[key] = type(defaults[key])(value)
    return problems or dataclasses.replace(stages, **{home: dataclasses.replace(settings, **taken)})


def _wrong(key: str, value: Override, default: Override) -> str | None:
    """Why a value cannot stand here; None if it can."""
    kind = type(default)
    fits = isinstance(value, kind) if kind in (bool, str) else not isinstance(value, bool | str)
    if not fits:
        return f"{value!r} is no {kind.__name__}"
    if kind is int and value != int(value):
        return f"{value!r} is no whole number"
    if kind is str and value not in ("report", "correct"):
        return f"{value!r} is not allowed; use report or correct"
    if kind in (int, float) and not float(value) > 0:
        return f"{value!r} is not above zero"
    if key == "taps" and int(value) % 2 == 0:
        return f"{value!r} taps have no middle one; use an odd number"
    return None


def _near(word: str, known: Any) -> str:
    close = difflib.get_close_matches(word, list(known), n=1)
    return f" did you mean {close[0]!r}?" if close else ""
