"""The verb `demodulate`: one capture from a file."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

from owlight.errors import InputError
from owlight.quantity import parse
from owlight.vocabulary.captures import Demodulation
from owlight.vocabulary.plan import Signal

_LANES = {1: ("I", "Q"), 2: ("XI", "XQ", "YI", "YQ")}


@dataclass(frozen=True)
class FileSignal:
    """What the file does not say of itself, as written on the command line."""

    symbol_rate: str
    sample_rate: str
    modulation: str
    polarisations: int
    rolloff: float
    reference: str


def demodulate_file(file: Path, asked: FileSignal) -> dict[str, Any]:
    """InputError names what is wrong with the file or the arguments and what to give."""
    from owlight.capture import check_capture, read_npz
    from owlight.demodulation import demodulate
    from owlight.demodulation.chain import Chain, LaneBelief, make_chain

    labels, order = _reference(asked.reference)
    signal = Signal(
        modulation=asked.modulation,
        symbol_rate_bd=_quantity("--symbol-rate", asked.symbol_rate, "Bd"),
        polarisations=asked.polarisations,
        pulse_shape="root raised cosine",
        rolloff=asked.rolloff,
        pattern_order=order,
        tributary_offsets=(),
    )
    lanes = _LANES[asked.polarisations]
    capture = read_npz(file, lanes, _quantity("--sample-rate", asked.sample_rate, "Hz"))
    bad = [check for check in check_capture(capture, frozenset(), 1) if check.finding == "bad"]
    if bad:
        raise InputError(f"{file} cannot be demodulated: {'; '.join(check.words for check in bad)}")
    name = "dual polarisation" if asked.polarisations == 2 else "single polarisation"
    chain = make_chain(name, signal, tuple(LaneBelief(lane, 0.0, False) for lane in lanes), None)
    return as_json(demodulate(capture, Chain.from_text(chain.text), labels))


def _quantity(option: str, text: str, unit: str) -> float:
    try:
        value = parse(text, unit)
    except ValueError as trouble:
        raise InputError(f"{option}: {trouble}.") from None
    if not value > 0:
        raise InputError(f"{option}: {text!r} is not possible. Give a rate above zero.")
    return value


def _reference(text: str) -> tuple[Any, int]:
    if text.isdecimal():
        return None, int(text)
    import numpy as np

    try:
        labels = np.load(text, allow_pickle=False)
    except (OSError, ValueError) as trouble:
        words = f"--reference {text!r} is neither a pattern order nor a readable .npy file ({trouble})"
        raise InputError(f"{words}. Give an order such as 15, or labels as polarisations x pattern length.") from None
    return np.atleast_2d(labels), 0


def as_json(found: Demodulation) -> dict[str, Any]:
    """Without lock there is no BER, only the reason; with zero errors an upper limit."""
    from owlight.statistics import exact_interval, upper_limit

    locked = found.status == "locked" and found.bits > 0
    interval: Callable[[], tuple[float, float]] = lambda: exact_interval(found.errors, found.bits)  # noqa: E731
    low, high = interval() if locked else (None, None)
    return {
        "status": found.status,
        "reason": found.reason,
        "ber": found.errors / found.bits if locked and found.errors else None,
        "errors": found.errors if locked else None,
        "bits": found.bits if locked else None,
        "ber_low": low,
        "ber_high": upper_limit(found.bits) if locked and found.errors == 0 else high,
        "snr_db": found.snr_db,
        "evm_percent": found.evm_percent,
        "gmi_bits": found.gmi_bits,
        "tributaries": [asdict(tributary) for tributary in found.tributaries],
        "stages": [{"stage": s.stage, "seconds": s.seconds, "figures": dict(s.figures)} for s in found.stages],
        "chain_sha256": found.chain_sha256,
        "seconds": found.seconds,
    }
