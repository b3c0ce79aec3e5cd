"""Header abbreviation and path rules, SCPI-99 volume 1 chapter 6, and IEEE 488.2 appendix A (from memory)."""

import pytest

from owlight.simulation.device.errors import DeviceError
from owlight.simulation.device.header import CommandTree, nodes_of, path_after
from owlight.simulation.device.message import units


def _tree() -> CommandTree[str]:
    tree: CommandTree[str] = CommandTree()
    tree.add("[SOURce]:POWer[:LEVel][:IMMediate][:AMPLitude]", "power")
    tree.add("[SENSe]:VOLTage<n>[:DC]:RANGe[:UPPer]", "range")
    tree.add("[SENSe]:VOLTage<n>[:DC]:OFFSet", "offset")
    tree.add("*RST", "reset", (False,))
    return tree


def _resolve(text: str) -> list[object]:
    tree, path, found = _tree(), (), []
    for unit in units(text):
        hit = tree.find(unit, path)
        path = path_after(unit, path)
        found.append(hit.target if hit.suffix == 1 else (hit.target, hit.suffix))
    return found


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("POW 1", ["power"]),
        ("power 1", ["power"]),
        ("Sour:Pow:Lev:Imm:Ampl 1", ["power"]),
        (":SOURCE:POWER:LEVEL:AMPLITUDE?", ["power"]),
        ("VOLT2:RANG 1", [("range", 2)]),
        ("VOLTAGE:DC:RANGE:UPP 1", ["range"]),
        ("SOUR1:POW 1", ["power"]),  # a suffix of 1 is the same as none
        ("SENS:VOLT3:RANG 1;OFFS 0", [("range", 3), ("offset", 3)]),  # the path keeps the node as it was sent
        ("VOLT:DC:RANG 1;OFFS 0;:POW?", ["range", "offset", "power"]),
        ("VOLT:DC:RANG 1;*RST;OFFS 0", ["range", "reset", "offset"]),  # common commands leave the path alone
    ],
)
def test_header_leads_where_it_should(text, expected):
    assert _resolve(text) == expected


@pytest.mark.parametrize(
    ("text", "number"),
    [
        ("POWE 1", -113),  # neither short nor long form
        ("VOLT:RANG 1;POW 2", -113),  # the path is VOLT now
        ("*RST?", -113),
        ("POW2 1", -114),
        ("SENS:VOLT2:RANG3 1", -114),
    ],
)
def test_wrong_header_is_refused(text, number):
    with pytest.raises(DeviceError) as raised:
        _resolve(text)
    assert raised.value.number == number


def test_ambiguous_tree_is_refused():
    tree: CommandTree[str] = CommandTree()
    tree.add("OUTPut[:STATe]", "one")
    with pytest.raises(ValueError, match="OUTP"):
        tree.add("OUTPut", "two")


def test_pattern_that_is_none_is_refused():
    with pytest.raises(ValueError, match="header pattern"):
        nodes_of("output state")
