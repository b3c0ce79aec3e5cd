"""Status bits and the error queue: IEEE 488.2 chapters 10 and 11, SCPI-99 volumes 1 (9) and 2 (21.8), from memory."""

import pytest

from owlight.simulation.device.errors import DeviceError
from owlight.simulation.device.status import Register, Status


def test_power_on_bit_stands_until_read(bench):
    assert bench.ask("attenuator", "*ESR?") == "128"
    assert bench.ask("attenuator", "*ESR?") == "0"


@pytest.mark.parametrize(("number", "bit"), [(-113, 5), (-222, 4), (-310, 3), (-410, 2), (1, 3)])
def test_error_class_sets_its_event_bit(number, bit):
    status = Status()
    status.read_standard_event()
    status.report(DeviceError(number))
    assert status.standard_event == 1 << bit


def test_queue_overflow_replaces_newest():
    status = Status(queue_size=3)
    for number in (-101, -102, -103, -104):
        status.report(DeviceError(number))
    texts = [status.queue.pop() for _ in range(4)]
    assert texts == ['-101,"Invalid character"', '-102,"Syntax error"', '-350,"Queue overflow"', '0,"No error"']


def test_summary_bits_stand_where_standard_has_them():
    status = Status()
    status.read_standard_event()
    assert status.byte(message_available=False) == 0
    assert status.byte(message_available=True) == 16
    status.report(DeviceError(-222))
    assert status.byte(False) == 4  # error queue
    status.standard_enable = 16
    assert status.byte(False) == 4 | 32  # ESB
    status.questionable.enable = 1
    status.questionable.flash(1)
    status.operation.enable = 2
    status.operation.change(2, True)
    assert status.byte(False) == 4 | 8 | 32 | 128
    status.set_service_enable(255)
    assert status.service_enable == 0xBF  # bit 6 cannot be enabled
    assert status.byte(False) == 4 | 8 | 32 | 64 | 128


def test_transition_filters_choose_the_edge():
    register = Register()
    register.change(2, True)
    register.change(2, False)
    assert register.read_event() == 2  # rising by default
    register.rising, register.falling = 0, 2
    register.change(2, True)
    assert register.event == 0
    register.change(2, False)
    assert register.event == 2


def test_preset_leaves_488_enables(bench):
    answer = bench.ask(
        "attenuator", "*ESE 12;*SRE 4;:STAT:OPER:ENAB 7;PTR 0;:STAT:PRES;*ESE?;*SRE?;:STAT:OPER:ENAB?;PTR?"
    )
    assert answer == "12;4;0;32767"


def test_cls_clears_events_and_queue_only(bench):
    bench.ask("attenuator", "*ESE 60;:STAT:QUES:ENAB 16384", "INP:ATT 99", "NONS")
    assert int(bench.ask("attenuator", "*STB?")) == 4 | 8 | 32
    assert bench.ask("attenuator", "*CLS;*STB?;*ESE?;:STAT:QUES:ENAB?;:SYST:ERR:COUN?") == "0;60;16384;0"


def test_rst_keeps_status_and_queue(bench):
    bench.ask("attenuator", "NONS", "*ESE 1", "*RST")
    assert bench.ask("attenuator", "*ESE?;:SYST:ERR:COUN?;*ESR?") == "1;1;160"


def test_opc_sets_its_bit_when_all_has_ended(bench):
    bench.ask("attenuator", "*CLS;:INP:ATT 20;*OPC")
    assert bench.ask("attenuator", "*ESR?") == "0"
    bench.time.advance(1.0)
    assert bench.ask("attenuator", "*ESR?") == "1"


def test_cls_forgets_pending_opc(bench):
    bench.ask("attenuator", "*ESR?;:INP:ATT 20;*OPC;*CLS")
    bench.time.advance(1.0)
    assert bench.ask("attenuator", "*ESR?") == "0"


def test_command_error_ends_message_execution_error_does_not(bench):
    assert bench.ask("attenuator", "INP:ATT 10;NONS;:INP:ATT?") == ""
    assert bench.ask("pattern_source", "SOUR:PULS:ROLL 5;ROLL?") == "1.00000000000E-01"
    assert [bench.error("attenuator"), bench.error("pattern_source")] == [-113, -222]


def test_query_after_identity_is_unterminated(bench):
    assert bench.ask("attenuator", "*ESR?;*IDN?;*ESE?") == "128;Simulated,Attenuator G1,S-1,1.0"
    assert bench.error("attenuator") == -440
    assert bench.ask("attenuator", "*ESR?") == "4"


def test_mandatory_queries_answer(bench):
    for query in ("*ESE?", "*SRE?", "*TST?", "*OPC?", "STAT:OPER?", "STAT:QUES:COND?", "STAT:QUES:NTR?"):
        assert bench.ask("receiver", query).isdigit(), query
    assert bench.ask("receiver", "SYST:VERS?") == "1999.0"
    assert bench.error("receiver") == 0
