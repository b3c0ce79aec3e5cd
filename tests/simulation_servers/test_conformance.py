"""SCPI conformance of the served bench through plain pyvisa; nothing of this project is imported.

Rules: IEEE Std 488.2-1992 and SCPI-99 (clauses from memory), HiSLIP: IVI-6.1.
"""

from __future__ import annotations

import socket
import time
from collections.abc import Iterator

import pytest
import pyvisa

TRANSPORTS = ("hislip", "socket")


@pytest.fixture(scope="module")
def manager() -> pyvisa.ResourceManager:
    return pyvisa.ResourceManager("@py")


def _open(manager, resource):
    return manager.open_resource(
        resource, read_termination="\n", write_termination="\n", timeout=5000, open_timeout=3000
    )


class Client:
    """`client(role, message)` queries, opening what is needed; `session` is pyvisa's own."""

    def __init__(self, manager, resources):
        self._manager = manager
        self._resources = resources
        self.sessions = {}

    def session(self, role):
        if role not in self.sessions:
            self.sessions[role] = _open(self._manager, self._resources[role])
        return self.sessions[role]

    def __call__(self, role, message):
        return self.session(role).query(message)

    def tell(self, role, message):
        self.session(role).write(message)


@pytest.fixture(params=TRANSPORTS)
def ask(request, served, manager) -> Iterator[Client]:
    """Sessions are closed and status is cleared behind the test."""
    client = Client(manager, {role: ways[request.param] for role, ways in served.items()})
    yield client
    for session in client.sessions.values():
        session.query("*CLS;*ESE 0;*SRE 0;:STAT:PRES;*OPC?")
        session.close()


def _error(ask, role):
    return int(ask(role, "SYST:ERR?").split(",")[0])


def test_identity_has_four_fields(ask, served):
    identities = {role: ask(role, "*IDN?").split(",") for role in served}
    assert all(len(fields) == 4 for fields in identities.values())
    assert len({fields[2] for fields in identities.values()}) == 7  # a serial number each


def test_mandatory_common_commands_answer(ask, served):
    for role in served:
        answer = ask(role, "*CLS;*ESE 255;*SRE 0;*ESE?;*SRE?;*ESR?;*STB?;*TST?;*WAI;*OPC?")
        assert answer == "255;0;0;16;0;1", role  # MAV stands while earlier answers of the message wait
        assert _error(ask, role) == 0


def test_mandatory_scpi_commands_answer(ask, served):
    for role in served:
        for register in ("OPER", "QUES"):
            ask(role, f"STAT:{register}:ENAB 5;ENAB?")
            assert ask(role, f"STAT:{register}:ENAB?;EVEN?;COND?").startswith("5;")
        assert ask(role, "STAT:PRES;:STAT:OPER:ENAB?;:STAT:QUES:ENAB?") == "0;0"
        assert ask(role, "SYST:VERS?") == "1999.0"
        assert ask(role, "SYST:ERR:NEXT?") == '0,"No error"'


@pytest.mark.parametrize(
    "header",
    ["INP:ATT?", "inp:att?", ":INPut:ATTenuation?", "INPUT:ATT?", "*ESE 0;INP:ATT?", " INP:ATT? ", "INP:ATT?\r"],
)
def test_header_may_be_spelled_so(ask, header):
    assert float(ask("attenuator", header)) >= 0.0


def test_header_between_the_forms_is_undefined(ask):
    ask.tell("attenuator", "INPU:ATT 3")
    assert _error(ask, "attenuator") == -113


def test_path_carries_over_the_semicolon(ask):
    answer = ask("power_meter", "SENS:POW:WAV 1550 NM;WAV?;:SENS:AVER:TIME 50 MS;TIME?")
    assert [float(part) for part in answer.split(";")] == [1.55e-6, 0.05]


@pytest.mark.parametrize(
    ("written", "level_dbm"),
    [("2 MW", 3.01), ("2000 UW", 3.01), ("0.002 W", 3.01), ("3", 3.0), ("3 DBM", 3.0), ("-27 DBW", 3.0)],
)
def test_power_suffix_scales(ask, written, level_dbm):
    assert float(ask("signal_laser", f"SOUR:POW {written};POW?")) == pytest.approx(level_dbm, abs=1e-9)


def test_maw_is_mega_and_mhz_is_mega(ask):
    ask.tell("signal_laser", "SOUR:POW 2 MAW")
    assert _error(ask, "signal_laser") == -222
    assert float(ask("pattern_source", "SOUR:SRAT 30000 MHZ;SRAT?")) == 30e9


@pytest.mark.parametrize(
    ("message", "number"),
    [
        ("SOUR:POW 2 V", -131),
        ("SOUR:POW", -109),
        ("SOUR:POW 1,2", -108),
        ("SOUR:POW 'x'", -104),
        ("SOUR:POW 2;:NONS", -113),
        ("OUTP MAYBE", -224),
        ("*ESE 256", -222),
        ("SOUR:POW ,", -109),
        ("SOUR:POW 'x", -151),
    ],
)
def test_mistake_is_queued_with_its_number(ask, message, number):
    ask.tell("local_oscillator", message)
    assert _error(ask, "local_oscillator") == number
    assert _error(ask, "local_oscillator") == 0


def test_limits_have_names(ask):
    low, high, default = (float(ask("local_oscillator", f"SOUR:POW? {word}")) for word in ("MIN", "MAX", "DEF"))
    assert low < default < high
    assert float(ask("local_oscillator", "SOUR:POW MAX;POW?")) == high


@pytest.mark.parametrize(("written", "answer"), [("ON", "1"), ("0", "0"), ("1", "1"), ("OFF", "0")])
def test_boolean_answers_as_number(ask, written, answer):
    assert ask("pattern_source", f"OUTP {written};OUTP?") == answer


def test_number_forms_are_all_understood(ask):
    answers = [
        ask("pattern_source", f"SOUR:PATT:OFFS2 {text};OFFS2?") for text in ("12", "1.2E1", "#HC", "#Q14", "#b1100")
    ]
    assert answers == ["12"] * 5


def test_queue_overflows_at_its_newest(ask):
    for _ in range(20):
        ask.tell("receiver", "NONSENSE")
    numbers = [_error(ask, "receiver") for _ in range(17)]
    assert numbers == [-113] * 15 + [-350, 0]


def test_error_classes_set_their_event_bits(ask):
    ask.tell("receiver", "*CLS;NONS")
    assert ask("receiver", "*ESR?") == "32"
    ask.tell("receiver", "INP:GAIN 99")
    assert ask("receiver", "*ESR?") == "16"
    ask("receiver", "*IDN?;*IDN?")
    assert ask("receiver", "*ESR?") == "4"


def test_status_byte_sums_up(ask):
    ask.tell("receiver", "*CLS;*ESE 32;*SRE 32;NONS")
    assert ask("receiver", "*STB?") == str(4 | 32 | 64)
    assert ask("receiver", "*CLS;*STB?") == "0"


def test_block_brings_every_byte(ask):
    ranges = "".join(f":SENS:VOLT{channel}:RANG 0.02;" for channel in (1, 2, 3, 4))  # so narrow that noise fills it
    ask("oscilloscope", f"{ranges}:SENS:SWE:POIN 5000;:FORM INT,8;*OPC?;:INIT;*OPC?")
    blocks = [_block(ask.session("oscilloscope"), channel, 5000) for channel in (1, 2, 3, 4)]
    assert all(b"\n" in block for block in blocks)  # data that look like a terminator end nothing
    assert len(set(blocks)) == 4
    assert ask("oscilloscope", "*OPC?") == "1"  # and nothing is left behind


def _block(session, channel, size):
    session.write(f"FETC:VOLT{channel}?")
    header = f"#{len(str(size))}{size}".encode()
    session.read_termination = None
    data = session.read_bytes(len(header) + size + 1, break_on_termchar=False)
    session.read_termination = "\n"
    assert data.startswith(header) and data.endswith(b"\n")
    return data[len(header) : -1]


def test_two_clients_have_an_exchange_each(served, manager):
    for transport in TRANSPORTS:
        one, other = (_open(manager, served["attenuator"][transport]) for _ in range(2))
        one.write("*IDN?")
        assert other.query("*OPC?") == "1"
        assert one.read().startswith("Simulated")
        one.close()
        other.close()


# ---- what only HiSLIP can carry ----


@pytest.fixture
def attenuator(served, manager) -> Iterator:
    session = _open(manager, served["attenuator"]["hislip"])
    session.query("*CLS;*OPC?")
    yield session
    session.close()


def test_serial_poll_shows_message_available(attenuator):
    assert attenuator.read_stb() == 0
    attenuator.write("*IDN?")
    _until(lambda: attenuator.read_stb() == 16)
    attenuator.read()
    assert attenuator.read_stb() == 0


def test_serial_poll_waits_for_operation(attenuator):
    attenuator.query("*ESE 1;*ESR?")
    attenuator.write("INP:ATT 20;*OPC")
    assert attenuator.read_stb() & 32 == 0
    _until(lambda: attenuator.read_stb() & 32)


def _until(true):
    end = time.monotonic() + 5.0
    while not true():
        assert time.monotonic() < end
        time.sleep(0.002)


def test_unread_answer_is_interrupted(attenuator):
    attenuator.write("*ESR?")
    _until(lambda: attenuator.read_stb() == 16)
    assert attenuator.query("*OPC?") == "1"
    assert attenuator.query("SYST:ERR?").startswith("-410")


def test_device_clear_ends_a_wait(served, manager):
    meter = _open(manager, served["power_meter"]["hislip"])
    meter.query("*CLS;:SENS:AVER:TIME 10;*OPC?")
    meter.write("READ?;:NONS")
    began_s = time.monotonic()
    meter.clear()
    # the answer of the ten seconds never comes; settings, errors and status are as they were
    assert float(meter.query("SENS:AVER:TIME?")) == 10.0
    assert time.monotonic() - began_s < 5.0
    assert meter.query("ABOR;:SENS:AVER:TIME 0.1;:SYST:ERR?") == '0,"No error"'
    meter.close()


def test_unknown_sub_address_is_refused(served, manager):
    resource = served["attenuator"]["hislip"].replace("hislip2", "hislip77")
    with pytest.raises(pyvisa.errors.VisaIOError):
        _open(manager, resource)


def test_long_answer_comes_in_parts_the_client_can_take(served, manager):
    session = _open(manager, served["oscilloscope"]["hislip"])
    session.timeout = 20_000
    session.query("SENS:SWE:POIN 600000;:FORM INT,16;:INIT;*OPC?")
    session.write("FETC:VOLT1?")
    data = session.read_raw()
    assert data[:9] == b"#71200000" and len(data) == 9 + 1_200_000 + 1  # more than one message of 1 MiB
    session.query("FORM INT,8;:SENS:SWE:POIN 5000;*OPC?")
    session.close()


def test_stranger_is_told_and_left(served):
    port = int(served["attenuator"]["hislip"].split(",")[1].split(":")[0])
    with socket.create_connection(("127.0.0.1", port), timeout=5) as stranger:
        stranger.sendall(b"GET / HTTP/1.1\r\n\r\n")
        assert stranger.recv(2) == b"HS"
        assert stranger.recv(1) == b"\x02"  # FatalError


# ---- what only a raw socket does ----


def test_packets_do_not_matter_on_a_socket(served):
    port = int(served["attenuator"]["socket"].split("::")[2])
    with socket.create_connection(("127.0.0.1", port), timeout=5) as plain, plain.makefile("rb") as lines:
        plain.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        for part in (b"*ID", b"N?\n*OPC", b"?\n*ESE 3;", b"*ESE?\n"):
            plain.sendall(part)
        answers = [lines.readline() for _ in range(3)]
    assert answers[1:] == [b"1\n", b"3\n"] and answers[0].startswith(b"Simulated")
