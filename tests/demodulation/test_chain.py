"""A chain is a text: what it holds, what it refuses, and that reading it loads nothing heavy."""

from __future__ import annotations

import json
import subprocess
import sys

import pytest

from owlight.demodulation.chain import STAGES, Chain, LaneBelief, make_chain
from owlight.errors import InputError
from owlight.vocabulary.plan import Signal

SIGNAL = Signal("QPSK", 32e9, 2, "root raised cosine", 0.1, 15, (0, 3178, 9760, 10855))
LANES = tuple(LaneBelief(name, 1e-12, False) for name in ("XI", "XQ", "YI", "YQ"))


def test_stages_stand_in_order():
    expected = "scaling, deskew, orthonormalisation, matched filter, clock recovery, equaliser, frequency offset, "
    assert ", ".join(STAGES) == expected + "carrier phase, synchronisation, counting"


def test_text_gives_the_chain_back():
    written = make_chain("dual polarisation", SIGNAL, LANES, {"equaliser": {"taps": 21}, "carrier phase": {}})
    read = Chain.from_text(written.text)
    assert (read.signal, read.lanes, read.sha256) == (SIGNAL, LANES, written.sha256)
    assert read.stages.equaliser.taps == 21
    assert json.loads(written.text)["stages"]["counting"]


def test_all_mistakes_come_at_once():
    overrides = {"equaliser": {"tap": 21, "taps": 20}, "cariers": {}, "carrier phase": {"window_symbols": "long"}}
    with pytest.raises(InputError) as caught:
        make_chain("single polarisation", SIGNAL, LANES, overrides)
    told = str(caught.value)
    for part in (
        "does not fit a signal of 2",
        "did you mean 'taps'",
        "use an odd number",
        "known: scaling",
        "is no int",
    ):
        assert part in told


@pytest.mark.parametrize("name", ["triple", "dual polarization"])
def test_unknown_chain_names_known_ones(name):
    with pytest.raises(InputError, match="known ones are single polarisation, dual polarisation"):
        make_chain(name, SIGNAL, LANES, None)


def test_reading_a_chain_loads_nothing_heavy():
    code = "import sys, owlight.demodulation.chain; print('numba' in sys.modules, 'scipy.signal' in sys.modules)"
    told = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert told.stdout.split() == ["False", "False"]
