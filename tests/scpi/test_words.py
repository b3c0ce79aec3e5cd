"""Program and response messages against IEEE 488.2 and SCPI-99 (clauses from memory where not marked otherwise)."""

import math
import random

import pytest

from owlight import scpi
from owlight.scpi.status import Operation, has_bit


@pytest.mark.parametrize("text", ["1", "+1", "-1.5", ".5", "5.", "1E3", "1.0e-12", "+1.55012E-06", " 2 "])
def test_every_decimal_form_is_read(text: str) -> None:
    # NR1, NR2, NR3 of 488.2 chapter 8.7: each is also a literal of Python's float
    assert scpi.parse_number(text) == float(text)


@pytest.mark.parametrize("text", ["", "1,2", "one", "1 dBm", "0x10", "1_000", "#15hello", "--1", "1e"])
def test_what_is_no_number_is_refused(text: str) -> None:
    with pytest.raises(ValueError):
        scpi.parse_number(text)


def test_special_numbers_never_become_powers() -> None:
    # SCPI-99 volume 1, 7.2.1
    assert scpi.parse_number("9.91E37") is None
    assert scpi.parse_number("+9.910000E+037") is None
    assert scpi.parse_number("9.9E37") == math.inf
    assert scpi.parse_number("-9.9E37") == -math.inf


def test_written_numbers_read_back_exactly() -> None:
    random.seed(488)
    for _ in range(2000):
        value = random.uniform(-1, 1) * 10.0 ** random.randint(-15, 15)
        text = scpi.write_number(value)
        assert float(text) == value
        assert scpi.parse_number(text) == value


@pytest.mark.parametrize("value", [math.nan, math.inf])
def test_what_is_not_finite_is_not_sent(value: float) -> None:
    with pytest.raises(ValueError):
        scpi.write_number(value)


def test_separators_in_quotes_do_not_split() -> None:
    assert scpi.split('1,"a,b","c""d,e",\'f,g\'', ",") == ["1", '"a,b"', '"c""d,e"', "'f,g'"]


def test_error_entry_keeps_device_text() -> None:
    # form of the entry: SCPI-99 volume 2, 21.8
    entry = scpi.ErrorEntry.from_text('-222,"Data out of range;SOUR:POW 99, limit 16"')
    assert (entry.number, entry.words) == (-222, "Data out of range;SOUR:POW 99, limit 16")
    assert scpi.ErrorEntry.from_text('+0,"No error"').number == 0


@pytest.mark.parametrize(("number", "bit"), [(-113, 5), (-222, 4), (-350, 3), (7, 3), (-410, 2), (-500, 7), (-800, 0)])
def test_error_classes_go_to_their_bits(number: int, bit: int) -> None:
    # SCPI-99 volume 2, 21.8: each class of errors sets one bit of the standard event register
    assert scpi.ErrorEntry(number, "").event_bit == bit


def test_block_headers_of_the_standard() -> None:
    assert scpi.block_length(b"#210abcdefghij") == (4, 10)
    assert scpi.block_length(b"#9000000001x") == (11, 1)
    assert [scpi.block_length(b"#800"[:n]) for n in range(5)] == [None] * 5


@pytest.mark.parametrize("header", [b"#0abc\n", b"abc", b"#x1", b"#2a1"])
def test_blocks_without_length_are_refused(header: bytes) -> None:
    with pytest.raises(scpi.BlockError):
        scpi.block_length(header)


def test_identity_needs_four_fields() -> None:
    assert scpi.IdentityText.from_text("maker,model,0,1.2,b").firmware == "1.2,b"
    with pytest.raises(ValueError):
        scpi.IdentityText.from_text("maker,model,0")


def test_condition_bits_have_their_weights() -> None:
    # SCPI-99 volume 1, chapter 9: settling weighs 2, measuring 16
    assert has_bit("2", Operation.SETTLING) and not has_bit("2", Operation.MEASURING)
    assert has_bit("+1.6E1", Operation.MEASURING)


@pytest.mark.parametrize("answer", ["", "9.91E37", "-1", "1.5", "65536", "ON"])
def test_what_is_no_register_has_no_bits(answer: str) -> None:
    with pytest.raises(ValueError):
        has_bit(answer, 1)
