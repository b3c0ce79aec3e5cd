"""One command of each kind over real sockets, HiSLIP and raw alike, and every fault the simulated bench can make."""

from __future__ import annotations

import numpy as np
import pytest

from owlight.errors import BenchError, InstrumentError, LinkError
from owlight.instrument.instrument import Instrument
from owlight.link import Link, Stamper
from owlight.simulation.process import Served, serve
from owlight.vocabulary.values import Exchange, Term

SHORT_S = 0.05
TRANSPORTS = ("hislip", "socket")


@pytest.fixture(scope="module")
def served(join_with) -> tuple[object, Served]:
    """One bench for all tests here; it ends with the process."""
    joined = join_with()
    return joined, serve(joined.simulated, joined.truth)


def reach(served, role: str, transport: str) -> Instrument:
    joined, server = served
    resource = server.announcement()["roles"][role][transport]
    stamper = Stamper(joined.clock)
    link = Link(role, resource, joined.events.append, joined.clock, stamper=stamper)
    link.open(2.0)
    return Instrument(role, joined.drivers[role], link, joined.events.append, stamper, joined.clock)


@pytest.mark.parametrize("transport", TRANSPORTS)
def test_one_command_of_each_kind(served, transport: str) -> None:
    laser = reach(served, "signal_laser", transport)
    assert laser.identify().serial_number == "OWL-SL-0001"
    assert laser.set(Term("signal_laser", "output"), True).read_back is True  # a switch
    assert laser.set(Term("signal_laser", "power"), 7.5).within  # a level
    with pytest.raises(InstrumentError, match="-222"):
        laser.set(Term("signal_laser", "power"), 99.0)  # a refusal
    source = reach(served, "pattern_source", transport)
    assert source.set(Term("pattern_source", "modulation"), "16QAM").read_back == "16QAM"  # a word
    assert source.set(Term("pattern_source", "pattern_order"), 11).read_back == 11  # a whole number
    meter = reach(served, "power_meter", transport)
    assert meter.read(Term("power_meter", "power"), count=2).value is not None  # a reading
    meter.act(Term("power_meter", "zero"))  # an action
    scope = reach(served, "oscilloscope", transport)
    scope.set(Term("oscilloscope", "record_length"), 20_000)
    ranges_v = dict.fromkeys((1, 2, 3, 4), 0.8)
    lanes = scope.record((1, 2, 3, 4), 20_000, ranges_v)  # a record
    assert all(lane.codes.size == 20_000 and lane.codes.any() for lane in lanes)
    assert not np.array_equal(lanes[0].codes, lanes[1].codes)


@pytest.mark.parametrize("transport", TRANSPORTS)
@pytest.mark.parametrize("kind", ["late", "missing", "half", "drop"])
def test_fault_poisons_and_a_new_session_is_right(served, transport: str, kind: str) -> None:
    joined, server = served
    instrument = reach(served, "attenuator", transport)
    link = instrument.link
    server.control._faults["attenuator"].ask(kind, 1, 4 * SHORT_S)
    with pytest.raises(LinkError) as trouble:
        link.query("INP:ATT?", SHORT_S)
    assert trouble.value.maybe_executed and not link.healthy
    assert next(e for e in reversed(joined.events) if isinstance(e, Exchange)).trouble
    link.reopen(2.0)
    for _ in range(3):
        assert float(link.query("INP:ATT?", 1.0)) == joined.simulated["attenuator"].value("attenuation")
        assert link.query("*IDN?", 1.0) == link.identity_text


@pytest.mark.parametrize("transport", TRANSPORTS)
@pytest.mark.parametrize("kind", ["garbled", "stale"])
def test_wrong_answer_is_never_a_setting(served, transport: str, kind: str) -> None:
    """The answer to `...;*OPC?` or to the error queue is spoilt: whatever it is, no setting is taken for done."""
    instrument = reach(served, "attenuator", transport)
    served[1].control._faults["attenuator"].ask(kind, 1, 0.0)
    with pytest.raises(BenchError):
        instrument.set(Term("attenuator", "attenuation"), 12.0)


def test_long_record_is_whole_on_both(served) -> None:
    scopes = [reach(served, "oscilloscope", transport) for transport in TRANSPORTS]
    scopes[0].set(Term("oscilloscope", "record_length"), 1_000_000)
    for scope in scopes:
        lane = scope.record((2,), 1_000_000, {2: 0.8})[0]
        assert lane.codes.size == 1_000_000
        # 20 mV rms in 0.8 V: half the samples lie beyond 0.674 sigma, which a shifted or doubled block would not show
        assert np.mean(np.abs(lane.codes) >= 5) == pytest.approx(0.4795, abs=0.003)
