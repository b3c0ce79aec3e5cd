"""Program message syntax, IEEE 488.2 clause 7 (clause numbers from memory)."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from owlight.simulation.device.errors import TEXTS, DeviceError
from owlight.simulation.device.message import Parameter, split, units

PARAMETERS = [
    ("A 1", Parameter("number", "1")),
    ("A -.5e-3", Parameter("number", "-.5e-3")),
    ("A 1.E+3 DBM", Parameter("number", "1.E+3", "DBM")),
    ("A 1550.12nm", Parameter("number", "1550.12", "NM")),
    ("A 2E 3", Parameter("number", "2E3")),
    ("A #HFf", Parameter("nondecimal", "255")),
    ("A #q17", Parameter("nondecimal", "15")),
    ("A #B101", Parameter("nondecimal", "5")),
    ("A auto", Parameter("word", "AUTO")),
    ('A "it said ""x"";"', Parameter("string", 'it said "x";')),
    ("A 'it''s'", Parameter("string", "it's")),
    ("A #15a;b,c", Parameter("block", "a;b,c")),
    ("A (@1,2)", Parameter("expression", "(@1,2)")),
]
MISTAKES = [
    ("A ,1", -109),
    ("A 1,", -109),
    ("A 1 2", -103),
    ("A,1", -103),
    ("A'x'", -111),
    ("A +", -121),
    ("A 'open", -151),
    ("A #19ab", -161),
    ("A (1", -171),
    ("A ]", -102),
    ("A \xe9", -101),
    ("1A", -102),
    ("\xe9", -101),
    ("ABCDEFGHIJKLM 1", -112),
    ("A ABCDEFGHIJKLM", -144),
    ("A::B", -103),
]


@pytest.mark.parametrize(("text", "expected"), PARAMETERS)
def test_parameter_is_read_as_meant(text, expected):
    (unit,) = units(text)
    assert unit.parameters == (expected,)


@pytest.mark.parametrize(("text", "number"), MISTAKES)
def test_mistake_has_its_standard_number(text, number):
    with pytest.raises(DeviceError) as raised:
        list(units(text))
    assert raised.value.number == number


def test_units_before_mistake_come_out():
    found = units("*CLS;:A:B?;  ;A ,")
    assert [str(next(found)), str(next(found))] == ["*CLS", "A:B?"]
    with pytest.raises(DeviceError):
        next(found)


# what arrives on a network port is anybody's; nothing but a standard error may come of it
@settings(max_examples=200, deadline=None)
@given(st.text(st.characters(max_codepoint=255, exclude_characters="\n")))
def test_any_bytes_end_in_standard_errors(text):
    try:
        list(units(text))
    except DeviceError as error:
        assert error.number in TEXTS


_UNITS = st.sampled_from(["*CLS", "A 1", "DATA #15a\nb\nc", "B 'x'", "C? #0", 'D "a;b"', "#H1F", "E #13\n\n\n"])


@settings(max_examples=100, deadline=None)
@given(st.lists(_UNITS), st.lists(st.integers(1, 7)))
def test_messages_do_not_depend_on_packets(sent, sizes):
    stream = "".join(message + "\n" for message in sent)
    whole, rest = split(stream)
    assert (whole, rest) == (sent, "")
    found, buffer, at = [], "", 0
    for size in [*sizes, len(stream)]:
        messages, buffer = split(buffer + stream[at : at + size])
        found += messages
        at += size
    assert found == sent
