"""The verb `demodulate`: one capture from a file."""

from __future__ import annotations

import math
import zipfile
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

    symbol_rate_bd, sample_rate_hz = _rates(asked)
    labels, order = _reference(asked.reference, asked.polarisations)
    signal = Signal(
        modulation=asked.modulation,
        symbol_rate_bd=symbol_rate_bd,
        polarisations=asked.polarisations,
        pulse_shape="root raised cosine",
        rolloff=asked.rolloff,
        pattern_order=order,
        tributary_offsets=(),
    )
    lanes = _LANES[asked.polarisations]
    capture = read_npz(file, lanes, sample_rate_hz)
    bad = [check for check in check_capture(capture, frozenset(), 1) if check.finding == "bad"]
    if bad:
        words = f"{file} cannot be demodulated: {'; '.join(check.words for check in bad)}"
        raise InputError(f"{words}. Record again: every lane connected, within the converter's range, of one length.")
    name = "dual polarisation" if asked.polarisations == 2 else "single polarisation"
    chain = make_chain(name, signal, tuple(LaneBelief(lane, 0.0, False) for lane in lanes), None)
    return as_json(demodulate(capture, Chain.from_text(chain.text), labels))


def _rates(asked: FileSignal) -> tuple[float, float]:
    symbol_rate_bd = _rate("--symbol-rate", asked.symbol_rate, "Bd", "32 GBd")
    sample_rate_hz = _rate("--sample-rate", asked.sample_rate, "Hz", "80 GS/s")
    least_hz = symbol_rate_bd * (1 + asked.rolloff)
    if sample_rate_hz < least_hz:
        # each lane is real with half the occupied band (Nyquist)
        words = f"--sample-rate: {asked.sample_rate!r} is below symbol rate times (1 + roll-off)"
        raise InputError(f"{words}, so the signal would fold. At least {least_hz / 1e9:.6g} GS/s are needed.")
    return symbol_rate_bd, sample_rate_hz


def _rate(option: str, text: str, unit: str, example: str) -> float:
    try:
        value = parse(text, unit)
    except ValueError as trouble:
        raise InputError(f'{option}: {trouble}. Write for example "{example}".') from None
    if not 0 < value < math.inf:
        raise InputError(f"{option}: {text!r} is not possible. Give a rate above zero.")
    return value


def _reference(text: str, polarisations: int) -> tuple[Any, int]:
    """Labels, or the order of a pattern."""
    if text.isdecimal():
        return None, int(text)
    import numpy as np

    wanted = "Give a pattern's order such as 15, or a .npy file of labels"
    wanted += f": integers from 0 to 3 (I bit * 2 + Q bit), {polarisations} x pattern length."
    if not Path(text).exists():
        raise InputError(f"--reference: there is no file {text!r}. {wanted}")
    try:
        labels = np.load(text, allow_pickle=False)
    except OSError as trouble:
        raise InputError(f"--reference: {text!r} cannot be read ({trouble.strerror or trouble}). {wanted}") from None
    except (ValueError, EOFError, zipfile.BadZipFile):
        raise InputError(f"--reference: {text!r} is no NumPy file, or is damaged. {wanted}") from None
    if not isinstance(labels, np.ndarray) or not np.issubdtype(labels.dtype, np.integer):
        held = f"{labels.dtype} numbers" if isinstance(labels, np.ndarray) else "an archive"
        raise InputError(f"--reference: {text!r} holds {held}, not one array of integers. {wanted}")
    labels = np.atleast_2d(labels)
    if labels.ndim != 2 or len(labels) != polarisations or labels.size == 0:
        raise InputError(f"--reference: {text!r} has the shape {' x '.join(map(str, labels.shape))}. {wanted}")
    if labels.min() < 0 or labels.max() > 3:
        raise InputError(f"--reference: {text!r} has labels from {labels.min()} to {labels.max()}. {wanted}")
    return labels, 0


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
