"""What a bench file may say, and what it is told where it contradicts itself."""

from __future__ import annotations

from pathlib import Path

import pytest

from owlight.bench import read_bench
from owlight.vocabulary.terms import ROLES

TEXT = (Path(__file__).parents[2] / "simulated_instruments" / "bench.toml").read_text("utf-8")


def test_demo_bench_has_every_role() -> None:
    document = read_bench(TEXT, "bench.toml")
    assert document.problems == ()
    assert document.value is not None
    assert document.value.role.keys() == ROLES.keys()
    assert [lane.name for lane in document.value.receiver.lane] == ["XI", "XQ", "YI", "YQ"]


@pytest.mark.parametrize(
    ("old", "new", "key", "words"),
    [
        ("[role.power_meter]", "[role.powermeter]", "role.powermeter", 'did you mean "power_meter"?'),
        ('highest_power = "13 dBm"', "", "role.signal_laser.highest_power", "no worst case"),
        ('floor = "-75 dBm"', "", "role.power_meter.floor", "is missing"),
        ('serial_number = "OWL-AT-0001"', 'serial_number = "OWL-PM-0001"', "role.power_meter.serial_number",
         "also that of attenuator"),
        ('"2027-03-31"', '"31.3.2027"', "role.power_meter.calibration_due", "write it as 2027-06-30"),
        ('serial_number = "OWL-SL-0001"', 'serial_number = "OWL-SL-0001"\nfloor = "1 nW"', "role.signal_laser.floor",
         "means nothing for signal_laser"),
        ('[simulation]\nworld = "world.toml"', "", "role.signal_laser.resource", "no [simulation]"),
        ('value = "-9.54 dB"', 'value = "9.54 dB"', "plane_minus_tap.value", "perhaps by its sign"),
        ('lo_least_loss = "0.7 dB"', 'lo_least_loss = "1.7 dB"', "light_path.lo_least_loss", "more than lo_loss"),
        ('attenuator_insertion_least = "1 dB"', 'attenuator_insertion_least = "2 dB"',
         "light_path.attenuator_insertion_least", "more than attenuator_insertion"),
        ('fixed_pad = "0 dB"', 'fixed_pad = "0 dBm"', "light_path.fixed_pad", "is a level"),
        ('diode_responsivity = "0.8 A/W"', "", "receiver", "exactly one of"),
        ('diode_responsivity = "0.8 A/W"', 'diode_responsivity = "1 A/W"\nport_responsivity = "0.1 A/W"', "receiver",
         "exactly one of"),
        ('name = "YQ"', 'name = "XQ"', "receiver.lane", "in this order"),
        ("channel = 4", "channel = 3", "receiver.lane[4].channel", "another lane"),
        ('[limit."photodiode"]', '[limit."photo diode"]', "limit.photodiode", "is missing"),
        ('zero_u = "20 pW"', "", "meter.zero_u", "is missing"),
    ],
)  # fmt: skip
def test_contradiction_is_named(old: str, new: str, key: str, words: str) -> None:
    assert TEXT.count(old) == 1, old
    found = read_bench(TEXT.replace(old, new), "b.toml").problems
    assert any(key == problem.key and words in problem.words and problem.line for problem in found), found


def test_one_laser_may_have_two_roles() -> None:
    assert read_bench(TEXT.replace("OWL-LO-0001", "OWL-SL-0001"), "b.toml").problems == ()
