"""A digitised record of the receiver's outputs, and what became of it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from owlight.vocabulary.values import Stamp

Codes = npt.NDArray[np.int8] | npt.NDArray[np.int16]


@dataclass(frozen=True, order=True)
class CaptureId:
    point: int
    attempt: int
    number: int


@dataclass(frozen=True, eq=False)
class Lane:
    """One lane, `XI`, `XQ`, `YI`, `YQ` (or `I`, `Q`): volts = codes * volts_per_code + offset_v.

    Without `in_volts` nobody told the scale, and what stands for volts is codes. Compare `sha256` (of the little-endian
    code bytes), never the arrays.
    """

    name: str
    codes: Codes
    volts_per_code: float
    offset_v: float
    clipped_fraction: float
    sha256: str
    in_volts: bool = True


@dataclass(frozen=True, eq=False)
class Capture:
    id: CaptureId
    at: Stamp
    sample_rate_hz: float
    lanes: tuple[Lane, ...]
    seed: int
    planned_time_s: float = 0.0


@dataclass(frozen=True)
class Tributary:
    """Counted bits of one tributary; `snr_db` is Es/N0 of its polarisation, unbiased."""

    name: str
    bits: int
    errors: int
    snr_db: float | None = None


@dataclass(frozen=True)
class StageReport:
    """How one stage fared: figures with the unit in each name."""

    stage: str
    seconds: float
    figures: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True)
class Demodulation:
    """`status` is "locked" or "no lock"; without lock there are no tributaries, so there is nothing to divide."""

    capture: CaptureId
    chain_sha256: str
    status: str
    reason: str
    tributaries: tuple[Tributary, ...]
    snr_db: float | None
    evm_percent: float | None
    gmi_bits: float | None
    stages: tuple[StageReport, ...]
    seconds: float

    @property
    def errors(self) -> int:
        return sum(tributary.errors for tributary in self.tributaries)

    @property
    def bits(self) -> int:
        return sum(tributary.bits for tributary in self.tributaries)
