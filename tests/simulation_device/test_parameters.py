"""Suffixes and answers: IEEE 488.2 clauses 7.7 and 8.7, SCPI-99 volume 1 chapter 7 (from memory)."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from owlight.simulation.device import parameters
from owlight.simulation.device.errors import DeviceError
from owlight.simulation.device.message import units


def _only(text: str) -> parameters.Parameter:
    (unit,) = units(f"A {text}")
    return unit.parameters[0]


@pytest.mark.parametrize(
    ("text", "unit", "expected"),
    [
        ("2 W", "W", 2.0),
        ("2 MW", "W", 2e-3),  # M is milli
        ("2 MAW", "W", 2e6),  # MA is mega
        ("2 MHZ", "HZ", 2e6),  # but not before HZ
        ("2 MAHZ", "HZ", 2e6),
        ("193.4 THZ", "HZ", 193.4e12),
        ("193.4 THZ", "THZ", 193.4),
        ("80 GHZ", "GHZ", 80.0),
        ("2 MS", "S", 2e-3),
        ("12.5PS", "S", 12.5e-12),
        ("1550.12 NM", "M", 1550.12e-9),
        ("1550.12 NM", "NM", 1550.12),
        ("1.55012 UM", "NM", 1550.12),
        ("3 DB", "DB", 3.0),
        ("-3 DBM", "DBM", -3.0),
        ("-3 DBMW", "DBM", -3.0),
        ("1 DBW", "DBM", 31.0),
        ("0 DBUW", "DBM", -30.0),
        ("1 MW", "DBM", 0.0),
        ("0 DBM", "W", 1e-3),
        ("#H10", "DB", 16.0),
        ("2", "W", 2.0),
    ],
)
def test_suffix_scales_to_unit(text, unit, expected):
    # 1e-12: one rounding of a float64 and its inverse
    assert parameters.in_unit(_only(text), unit, True) == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize(
    ("text", "unit", "suffixes", "number"),
    [
        ("2 V", "W", True, -131),
        ("2 XW", "W", True, -131),
        ("2 DB", "DBM", True, -131),  # a ratio is no level
        ("2 DBM", "DB", True, -131),
        ("2 W", "W", False, -138),
        ("2 W", "", True, -138),
        ("2 ABCDEFGHIJKLMW", "W", True, -134),
        ("0 W", "DBM", True, -222),
        ("1E99999", "W", True, -123),
        ("1" * 256, "W", True, -124),
        ("'2'", "W", True, -104),
    ],
)
def test_wrong_suffix_is_refused(text, unit, suffixes, number):
    with pytest.raises(DeviceError) as raised:
        parameters.in_unit(_only(text), unit, suffixes)
    assert raised.value.number == number


@pytest.mark.parametrize(
    ("text", "expected"), [("ON", True), ("off", False), ("1", True), ("0", False), ("0.4", False), ("-7", True)]
)
def test_boolean_is_a_word_or_rounded(text, expected):
    assert parameters.boolean(_only(text)) is expected


@given(st.floats(allow_nan=False, allow_infinity=False, min_value=-1e37, max_value=1e37))
def test_answered_number_reads_back(value):
    answer = parameters.nr3(value)
    assert "E" in answer
    assert float(answer) == pytest.approx(value, rel=1e-11)  # twelve digits are answered


def test_special_numbers_have_standard_values():
    answers = [parameters.nr3(value) for value in (math.nan, math.inf, -math.inf)]
    assert [float(answer) for answer in answers] == [9.91e37, 9.9e37, -9.9e37]


@given(st.binary(max_size=300))
def test_block_reads_back(data):
    encoded = parameters.block(data).decode("latin-1")
    (unit,) = units(f"A {encoded}")
    assert unit.parameters[0].text.encode("latin-1") == data
