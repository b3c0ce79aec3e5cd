"""Captures from files that anybody made: what is read, and what is refused in words that say what to give."""

from __future__ import annotations

import hashlib

import numpy as np
import pytest

from owlight.capture import read_npz
from owlight.errors import InputError

LANES = ("XI", "XQ", "YI", "YQ")


@pytest.fixture
def saved(tmp_path):
    def save(**arrays):
        np.savez(tmp_path / "capture.npz", **arrays)
        return tmp_path / "capture.npz"

    return save


def noise(dtype=np.int8, spread=20.0, shape=(4, 5000)):
    return np.round(np.random.default_rng(1).standard_normal(shape) * spread).astype(dtype)


def test_lanes_come_in_order(saved):
    codes = noise()
    capture = read_npz(saved(codes=codes, volts_per_code=2e-3), LANES, 80e9)
    assert [lane.name for lane in capture.lanes] == list(LANES)
    assert capture.sample_rate_hz == 80e9
    assert np.array_equal(capture.lanes[3].codes, codes[3])
    assert capture.lanes[2].volts_per_code == 2e-3


def test_hash_is_of_little_endian_bytes(saved):
    codes = noise(">i2")
    lane = read_npz(saved(codes=codes), LANES, 80e9).lanes[0]
    assert lane.sha256 == hashlib.sha256(codes[0].astype("<i2").tobytes()).hexdigest()


def test_unsigned_codes_keep_their_values(saved):
    codes = (noise(np.int64, 900.0) + 2**15).astype(np.uint16)
    lane = read_npz(saved(codes=codes), LANES, 80e9).lanes[0]
    assert np.array_equal(lane.codes * lane.volts_per_code + lane.offset_v, codes[0])


@pytest.mark.parametrize(
    ("arrays", "words"),
    [
        ({"codes": noise().T}, "Transpose it"),
        ({"codes": noise(shape=(2, 50))}, "4 lanes"),
        ({"codes": noise(np.float64)}, "not integers"),
        ({"codes": noise(shape=(4, 0))}, "no sample"),
        ({"codes": noise(np.int64) * 10_000}, "more than 16 bits"),
        ({"data": noise()}, "no array `codes`, but data"),
        ({"codes": noise(), "volts_per_code": np.ones(3)}, "volts_per_code"),
        ({"codes": noise(), "volts_per_code": np.nan}, "volts_per_code"),
    ],
)
def test_wrong_arrays_are_refused(saved, arrays, words):
    with pytest.raises(InputError, match=words):
        read_npz(saved(**arrays), LANES, 80e9)


@pytest.mark.parametrize("content", [b"", b"no archive at all", None])
def test_wrong_files_are_refused(tmp_path, content):
    file = tmp_path / "capture.npz"
    if content is not None:
        file.write_bytes(content)
    with pytest.raises(InputError, match=r"numpy\.savez"):
        read_npz(file, LANES, 80e9)


def test_truncated_file_is_refused(saved):
    file = saved(codes=noise())
    file.write_bytes(file.read_bytes()[:9000])
    with pytest.raises(InputError, match=r"numpy\.savez"):
        read_npz(file, LANES, 80e9)


def test_single_array_is_refused(tmp_path):
    np.save(tmp_path / "codes.npy", noise())
    with pytest.raises(InputError, match="single array"):
        read_npz(tmp_path / "codes.npy", LANES, 80e9)


@pytest.mark.parametrize("sample_rate_hz", [0.0, -1.0, float("nan")])
def test_impossible_rates_are_refused(saved, sample_rate_hz):
    with pytest.raises(InputError, match="sample rate"):
        read_npz(saved(codes=noise()), LANES, sample_rate_hz)


@pytest.mark.parametrize(("limit", "expected"), [(127, 0.0), (40, 0.0456)])
def test_clipping_shows_without_knowing_the_range(saved, limit, expected):
    # 40 is two standard deviations: erfc(sqrt 2) = 4.55 % lie beyond; 20,000 samples scatter by 0.15 %
    codes = np.clip(noise(shape=(4, 20_000)), -limit, limit)
    assert read_npz(saved(codes=codes), LANES, 80e9).lanes[0].clipped_fraction == pytest.approx(expected, abs=6e-3)
