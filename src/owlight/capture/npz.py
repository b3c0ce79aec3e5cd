"""A capture from a NumPy archive made anywhere."""

from __future__ import annotations

import hashlib
import zipfile
import zlib
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from owlight.errors import InputError
from owlight.vocabulary.captures import Capture, CaptureId, Codes, Lane
from owlight.vocabulary.values import Stamp

_PILED_UP = 3.0
"""A range's end that holds so many times the samples of its neighbour was reached, not just touched."""


def read_npz(file: Path, lanes: tuple[str, ...], sample_rate_hz: float) -> Capture:
    """The capture in `codes` (lanes x samples, integers of 8 to 16 bits), its lanes named in their order.

    `volts_per_code` (one, or one a lane) may stand beside it; without it the lanes are not `in_volts`. InputError says
    what is wrong and what to give.
    """
    codes, volts_per_code = _arrays(file)
    wanted = f"Give `codes` as lanes x samples of integers, with {len(lanes)} lanes ({', '.join(lanes)})."
    if codes.ndim != 2 or len(codes) != len(lanes):
        words = f"`codes` in {file} has the shape {' x '.join(map(str, codes.shape)) or 'of one number'}"
        turned = codes.ndim == 2 and codes.shape[1] == len(lanes)
        raise InputError(f"{words}. {'Transpose it: g' + wanted[1:] if turned else wanted}")
    if codes.shape[1] == 0:
        raise InputError(f"`codes` in {file} holds no sample. {wanted}")
    if not np.issubdtype(codes.dtype, np.integer):
        raise InputError(f"`codes` in {file} are {codes.dtype}, not integers. {wanted}")
    if not sample_rate_hz > 0.0:
        raise InputError(f"A sample rate of {sample_rate_hz} S/s is not possible. Give one above zero.")
    scales = _scales(file, np.ones(1) if volts_per_code is None else volts_per_code, len(lanes))
    made = tuple(_lane(name, row, scale, file) for name, row, scale in zip(lanes, codes, scales, strict=True))
    if volts_per_code is None:
        made = tuple(replace(lane, in_volts=False) for lane in made)
    return Capture(CaptureId(0, 0, 0), Stamp("", 0.0, 0), sample_rate_hz, made, 0)


def _arrays(file: Path) -> tuple[npt.NDArray[Any], npt.NDArray[Any] | None]:
    what_to_do = "Give a .npz file saved with numpy.savez(file, codes=...)."
    if not file.exists():
        raise InputError(f"There is no file {file}. {what_to_do}")
    try:
        archive = np.load(file, allow_pickle=False)
        if isinstance(archive, np.ndarray):
            raise InputError(f"{file} holds a single array without a name. {what_to_do}")
        with archive:
            if "codes" not in archive.files:
                held = ", ".join(archive.files) or "nothing"
                raise InputError(f"{file} has no array `codes`, but {held}. Save it with numpy.savez(file, codes=...).")
            scale = archive["volts_per_code"] if "volts_per_code" in archive.files else None
            return archive["codes"], scale
    except OSError as trouble:
        raise InputError(f"{file} cannot be read ({trouble.strerror or trouble}). {what_to_do}") from trouble
    except (ValueError, EOFError, RuntimeError, zipfile.BadZipFile, zlib.error) as trouble:
        # NumPy's own words advise to allow pickles, which would run whatever the file says
        words = f"{file} cannot be read as a NumPy archive: it is something else, damaged, or holds Python objects"
        raise InputError(f"{words}. {what_to_do}") from trouble


def _scales(file: Path, volts_per_code: npt.NDArray[Any], lanes: int) -> tuple[float, ...]:
    flat = np.atleast_1d(volts_per_code).ravel()
    good = (
        flat.size in (1, lanes)
        and np.issubdtype(flat.dtype, np.number)
        and bool(np.all(np.isfinite(flat) & (flat > 0)))
    )
    if not good:
        raise InputError(f"`volts_per_code` in {file} is not usable. Give one number above zero, or one a lane.")
    return tuple(float(value) for value in np.broadcast_to(flat, lanes))


def _lane(name: str, row: npt.NDArray[Any], volts_per_code: float, file: Path) -> Lane:
    lowest, highest = int(row.min()), int(row.max())
    middle = 0 if lowest >= -(2**15) and highest < 2**15 else 2**15
    if lowest - middle < -(2**15) or highest - middle >= 2**15:
        words = f"Lane {name} in {file} has codes from {lowest} to {highest}, more than 16 bits hold"
        raise InputError(f"{words}. Give the converter's own codes.")
    codes: Codes = row.astype(np.int8) if row.dtype == np.int8 else (row.astype(np.int64) - middle).astype(np.int16)
    digest = hashlib.sha256(np.ascontiguousarray(codes).astype(codes.dtype.newbyteorder("<")).tobytes()).hexdigest()
    return Lane(name, codes, volts_per_code, middle * volts_per_code, clipped_fraction(codes), digest)


def clipped_fraction(codes: Codes) -> float:
    """Samples piled up at the ends of a range that nobody told: more than the distribution's tail would put there.

    >>> tail = np.array([0] * 100 + [1] * 40 + [2] * 3 + [-1] * 40 + [-2] * 2, np.int8)
    >>> clipped_fraction(tail), round(clipped_fraction(np.clip(tail, -1, 1)), 3)
    (0.0, 0.0)
    >>> round(clipped_fraction(np.concatenate([tail, np.full(40, 3, np.int8)])), 2)
    0.16
    """
    values, counts = np.unique(codes, return_counts=True)
    if len(values) < 3:
        return 0.0
    piled = 0
    for end, neighbour in ((0, 1), (-1, -2)):
        if counts[end] > _PILED_UP * counts[neighbour]:
            piled += int(counts[end] - counts[neighbour])
    return piled / codes.size
