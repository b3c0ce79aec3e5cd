"""Terms, settings and what instruments answered."""

from __future__ import annotations

from dataclasses import dataclass

Value = float | int | bool | str
"""What a setting can hold; a float is in the unit that `terms.TERMS` names for its term."""


@dataclass(frozen=True, order=True)
class Term:
    """`role.name`, as it is written in files: `signal_laser.power`. A bench quantity has the role `bench`."""

    role: str
    name: str

    def __str__(self) -> str:
        return self.name if self.role == "bench" else f"{self.role}.{self.name}"


@dataclass(frozen=True)
class Stamp:
    """`utc` for people, `monotonic_s` for durations, `count` for order."""

    utc: str
    monotonic_s: float
    count: int


@dataclass(frozen=True)
class Setting:
    term: Term
    value: Value


@dataclass(frozen=True)
class Applied:
    """A setting as it was commanded and as the instrument says it stands."""

    at: Stamp
    setting: Setting
    read_back: Value | None
    tolerance: float | None
    within: bool
    settled_s: float


@dataclass(frozen=True)
class Reading:
    """A measured value; `value` is None where the instrument said not-a-number. `phase` is "before", "after" or ""."""

    at: Stamp
    term: Term
    value: float | None
    standard_deviation: float | None = None
    count: int = 1
    phase: str = ""


@dataclass(frozen=True)
class Identity:
    """Who answered `*IDN?` in which role; `driver` names the driver file used."""

    at: Stamp
    role: str
    resource: str
    maker: str
    model: str
    serial_number: str
    firmware: str
    driver: str


@dataclass(frozen=True)
class Exchange:
    """One message out and the response in; blocks are kept as length and hash. Empty `trouble` means none."""

    at: Stamp
    role: str
    sent: str
    received: str
    block_bytes: int | None
    block_sha256: str | None
    seconds: float
    trouble: str
    maybe_executed: bool
