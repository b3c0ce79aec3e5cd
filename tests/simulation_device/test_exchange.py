"""Whatever a client sends, the instrument lives on; what one client does is no other's business."""

from __future__ import annotations

from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from owlight.simulation.device.exchange import Exchange

_WORDS = [
    "SOUR",
    "POW",
    "WAV",
    "PATT",
    "OFFS2",
    "OUTP",
    "*RST",
    "*IDN",
    "STAT",
    "OPER",
    "ENAB",
    "DBM",
    "MAW",
    "MIN",
    "NAN",
]
_MARKS = ["?", ":", ";", ",", " ", "\n", "(", "'a", '"b"', "\xff"]
_NUMBERS = ["1", "-2.5", "1E999999999", "1E99999", "#H" + "F" * 5000, "9" * 400, "#15ab", "#\xb2", "#2\xb95", "#0"]
_PIECES = st.sampled_from(_WORDS + _MARKS + _NUMBERS)


@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.lists(_PIECES, max_size=25), st.sampled_from(["signal_laser", "pattern_source", "power_meter"]))
def test_any_message_leaves_instrument_alive(bench, pieces, role):
    exchange = Exchange(bench.instruments[role])
    exchange.write("".join(pieces).encode("latin-1"), end=True)
    assert exchange.write(b"*OPC?\n") == [b"1\n"]


def test_unfinished_block_of_one_client_ends_with_it(bench):
    exchange = Exchange(bench.instruments["attenuator"])
    assert exchange.write(b"INP:ATT #19ab", end=True) == []
    assert exchange.write(b"*OPC?", end=True) == [b"1\n"]
    assert bench.error("attenuator") == -161


def test_unread_answer_is_interrupted(bench):
    exchange = Exchange(bench.instruments["attenuator"])
    exchange.write(b"*ESR?\n")
    exchange.unread = True
    assert exchange.status_byte() == 16
    assert exchange.write(b"*ESR?\n") == [b"4\n"]
    assert bench.error("attenuator") == -410


def test_clear_empties_buffers_and_keeps_status(bench):
    exchange = Exchange(bench.instruments["attenuator"])
    exchange.write(b"NONS\nINP:ATT 7;")
    exchange.clear()
    exchange.ready()
    assert exchange.write(b"*ESR?;:INP:ATT?\n") == [b"160;0.00000000000E+00\n"]
    assert bench.error("attenuator") == -113


def test_cleared_wait_gives_no_answer(bench):
    """In wall time, so that the wait is one; a time-out ends the test if the clear does not."""
    bench.time.let_pass()
    exchange = Exchange(bench.instruments["attenuator"])
    exchange.clear()  # it is there before the wait begins: the wait must look, too
    assert exchange.write(b"INP:ATT 60;*OPC?\n") == []


def test_time_goes_on_when_nobody_steps_it(bench):
    bench.time.advance(1000.0)
    bench.time.let_pass()
    first_s, then_s = bench.time.now_s(), bench.time.now_s()
    assert 1000.0 <= first_s <= then_s < 1060.0
