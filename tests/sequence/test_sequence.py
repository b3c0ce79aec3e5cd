"""What a sequence file may say, and what it is told where it may not."""

from __future__ import annotations

from pathlib import Path

import pytest

from owlight.sequence import Sequence, read_sequence
from owlight.sequence.values import stepped
from owlight.vocabulary.terms import LO_POWER, RECEIVED_POWER, term_of

SHIPPED = Path(__file__).parents[2] / "sequences"
QPSK = (SHIPPED / "qpsk_sensitivity.toml").read_text("utf-8")


def words_of(text: str) -> list[tuple[str, str]]:
    return [(problem.key, problem.words) for problem in read_sequence(text, "s.toml").problems]


def shipped(name: str) -> Sequence:
    document = read_sequence((SHIPPED / name).read_text("utf-8"), name)
    assert document.problems == ()
    assert document.value is not None
    return document.value


@pytest.mark.parametrize("path", sorted(SHIPPED.glob("*.toml")), ids=lambda path: path.stem)
def test_shipped_sequences_are_right(path: Path) -> None:
    assert shipped(path.name).axes


def test_values_are_in_the_unit_of_their_term() -> None:
    sequence = shipped("qpsk_sensitivity.toml")
    assert sequence.axes[0].values == tuple(-40.0 + 0.5 * place for place in range(9))
    assert sequence.conditions[0].drifts_less_than == 0.02
    assert sequence.measurand is not None and sequence.measurand.threshold_ber == 3.8e-3


def test_axes_stand_outermost_first() -> None:
    assert [axis.term for axis in shipped("lo_power_map.toml").axes] == [LO_POWER, RECEIVED_POWER]


def test_sequence_without_capture_is_legitimate() -> None:
    sequence = shipped("power_log.toml")
    assert sequence.capture is None and sequence.measurand is None and len(sequence.readings) == 3


def spoilt(old: str, new: str) -> list[tuple[str, str]]:
    assert QPSK.count(old) == 1, old
    return words_of(QPSK.replace(old, new))


@pytest.mark.parametrize(
    ("old", "new", "key", "words"),
    [
        (
            'setting = "received_power"',
            'setting = "recieved_power"',
            "sweep[1].setting",
            'did you mean "received_power"?',
        ),
        (
            '"signal_laser.power" =',
            '"signal_lasr.power" =',
            'settings."signal_lasr.power"',
            'mean "signal_laser"? Roles:',
        ),
        (
            '"signal_laser.power" = "10 dBm"',
            '"signal_laser.power" = "10 dB"',
            'settings."signal_laser.power"',
            "a ratio",
        ),
        ('"signal_laser.power" = "10 dBm"', '"signal_laser.power" = 10', 'settings."signal_laser.power"', "in quotes"),
        ('step = "0.5 dB"', 'step = "0.5 dBm"', "sweep[1].step", "is a level (dBm or W), but a ratio (dB)"),
        ('step = "0.5 dB"', 'step = "0.7 dB"', "sweep[1].step", "not a whole number of steps"),
        ('step = "0.5 dB"', 'step = "-0.5 dB"', "sweep[1].step", "not above zero"),
        ('step = "0.5 dB"', 'step = "1e-9 dB"', "sweep[1].step", "at most 10000"),
        ('step = "0.5 dB"', "", "sweep[1]", "missing: step"),
        ('step = "0.5 dB"', 'values = ["1 dBm"]', "sweep[1].values", "give the one or the others"),
        (
            '"power_meter.power", "rec',
            '"power_meter.zero", "rec',
            "record.readings[1]",
            "is something an instrument does",
        ),
        (
            'drifts_less_than = "0.02 dB"',
            'drifts_less_than = "1 nW"',
            "before[1].wait_until.drifts_less_than",
            "a ratio",
        ),
        ('at_most = "60 min"', 'at_most = "4 min"', "before[1].wait_until.at_most", "shorter than `over`"),
        ("[measurand]", "[signal.x]", "capture", "needs [measurand]"),
        ("ber = 3.8e-3", "ber = 4e-3", "measurand.threshold.ber", "0.0038 belongs to this name"),
        (
            '{ name = "7 % overhead hard-decision FEC", ber = 3.8e-3 }',
            '{ name = "7 % FEC" }',
            "measurand.threshold.name",
            "another name needs its ber",
        ),
        ("symbols = 100_000", "symbols = 10", "capture.symbols", "outside 1000"),
        ("symbols = 100_000", 'symbols = "many"', "capture.symbols", "not a whole number"),
        ('sample_rate = "80 GS/s"', 'sample_rate = "35 GS/s"', "capture.sample_rate", "would fold"),
        ('chain = "dual polarisation"', 'chain = "single polarisation"', "demodulation.chain", "polarisations = 2"),
        ("polarisations = 2", "polarisations = 1", "measurand.power", "does not fit polarisations = 1"),
        ('modulation = "QPSK"', 'modulation = "qpsk"', "signal.modulation", 'did you mean "QPSK"?'),
        ('"spread" }', "[1, 2] }", "signal.pattern.tributary_offsets", "needs 4 offsets"),
        ('lo_power = "12 dBm"', "", "settings", "lacks lo_power"),
        ('"signal_laser.power" = "10 dBm"', "", "settings", "lacks signal_laser.power"),
        (
            'lo_power = "12 dBm"',
            'lo_power = "12 dBm"\n"local_oscillator.power" = "9 dBm"',
            'settings."local_oscillator.power"',
            "contradicts lo_power",
        ),
        (
            'lo_power = "12 dBm"',
            'lo_power = "12 dBm"\nreceived_power = "-36 dBm"',
            "settings.received_power",
            "also swept",
        ),
        (
            'lo_power = "12 dBm"',
            'lo_power = "12 dBm"\n"pattern_source.rolloff" = 0.2',
            'settings."pattern_source.rolloff"',
            "[signal] decides this",
        ),
        ("every = 9", "every = 0", "reference.every", "at least 1"),
        ('received_power = "-38 dBm"', "", "reference", "lacks received_power"),
        ('order = "shuffled passes"', 'order = "random"', "sweep[1].order", "shuffled passes"),
        ("passes = 3", "passes = 0", "stop.passes", "outside 1"),
    ],
)
def test_mistake_is_named_with_what_is_allowed(old: str, new: str, key: str, words: str) -> None:
    found = spoilt(old, new)
    assert any(key == at and words in said for at, said in found), found


def test_mistakes_of_every_kind_come_together() -> None:
    text = QPSK.replace("symbols = 100_000", "symbls = 1").replace('to = "-36 dBm"', 'to = "-36 dB"')
    text = text.replace('["power_meter.power"', '["power_meter.powr"')
    keys = [problem.key for problem in read_sequence(text, "s.toml").problems]
    assert keys == ["sweep[1].to", "record.readings[1]", "capture.symbols", "capture.symbls"]


MISNAMED = QPSK.replace('setting = "received_power"', 'setting = "recieved_power"')


def test_wrong_name_hides_no_wrong_value() -> None:
    text = MISNAMED.replace('from = "-40 dBm"', 'from = "-40 dB"').replace(
        '"signal_laser.power" =', '"signal_lasr.power" ='
    )
    text = text.replace('"signal_lasr.power" = "10 dBm"', '"signal_lasr.power" = "10 m"')
    text = text.replace('{ received_power = "-36 dBm" }', '{ recieved_power = "-36" }')
    found = words_of(text)
    keys = [key for key, _ in found]
    names = ['settings."signal_lasr.power"', "before[1].wait_until.at.recieved_power", "sweep[1].setting"]
    assert sorted(keys) == sorted([*names, *names[:2], "sweep[1].from"]), found


def test_wrong_name_invents_no_lack() -> None:
    """A misspelt sweep is still the sweep that the reference point and the measurand need."""
    assert [key for key, _ in words_of(MISNAMED)] == ["sweep[1].setting"]
    laser = QPSK.replace('"signal_laser.power" =', '"signal_laser.level" =')
    assert [key for key, _ in words_of(laser)] == ['settings."signal_laser.level"']
    point = QPSK.replace('received_power = "-38 dBm"', 'receivd_power = "-38 dBm"')
    assert [key for key, _ in words_of(point)] == ["reference.receivd_power"]


def test_mistakes_carry_their_lines() -> None:
    text = QPSK.replace('step = "0.5 dB"', 'step = "0.7 dB"')
    (problem,) = read_sequence(text, "s.toml").problems
    assert text.splitlines()[(problem.line or 0) - 1].startswith('step = "0.7 dB"')


def test_unreadable_capture_is_not_called_missing() -> None:
    keys = [key for key, _ in spoilt("symbols = 100_000", "symbols = 1.5")]
    assert keys == ["capture.symbols"]


def test_steps_go_down_as_well() -> None:
    assert stepped(-37.8, -38.1, "0.1 dB", RECEIVED_POWER) == (-37.8, -37.9, -38.0, -38.1)


def test_wavelength_steps_are_lengths() -> None:
    wavelength = term_of("signal_laser.wavelength")
    assert stepped(1550.0, 1550.2, "100 pm", wavelength) == (1550.0, 1550.1, 1550.2)
    with pytest.raises(ValueError, match="write it in nm"):
        stepped(1550.0, 1551.0, "50 GHz", wavelength)


def test_words_have_no_ascending_order() -> None:
    text = 'sequence="s"\nformat_version=1\n[[sweep]]\nsetting="oscilloscope.coupling"\nvalues=["AC","DC"]\n'
    assert words_of(text) == []
    assert "list them as you want them" in words_of(text + 'order="ascending"')[0][1]


def test_huge_maps_are_refused() -> None:
    sweep = '[[sweep]]\nsetting="{}"\nfrom="0 dB"\nto="40 dB"\nstep="0.1 dB"\n'
    text = 'sequence="s"\nformat_version=1\n' + sweep.format("attenuator.attenuation") + sweep.format("receiver.gain")
    assert "gives 160801 points" in words_of(text)[0][1]
