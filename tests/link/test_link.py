"""The link under faults, over real loopback sockets and in memory; deadlines are short and real."""

import hashlib
import socket
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import suppress

import numpy as np
import pytest
import pyvisa

from owlight.clock import ManualClock
from owlight.errors import LinkError
from owlight.link import Link, memory_opener
from owlight.link.session import Session
from owlight.vocabulary.events import Event
from owlight.vocabulary.values import Exchange

SHORT_S = 0.05
DATA = np.random.default_rng(1).integers(0, 256, 300_001, dtype=np.uint8)


class Talker:
    """A raw socket instrument with bad habits, one connection after the other."""

    def __init__(self) -> None:
        self.identity = b"maker,model,SN1,1.0"
        self.connections = 0
        self._listener = socket.create_server(("127.0.0.1", 0))
        self.port = self._listener.getsockname()[1]
        threading.Thread(target=self._serve, daemon=True).start()

    def _serve(self) -> None:
        while True:
            try:
                wire, _ = self._listener.accept()
            except OSError:
                return
            self.connections += 1
            threading.Thread(target=self._talk, args=(wire,), daemon=True).start()

    def _talk(self, wire: socket.socket) -> None:
        block = b"#6%06d" % DATA.size + DATA.tobytes()
        answers: dict[bytes, Callable[[], bytes]] = {
            b"*IDN?": lambda: self.identity + b"\n",
            b"BLOCK?": lambda: block + b"\n",
            b"CUT?": lambda: block[:1000],
            b"ENDLESS?": lambda: b"#0" + DATA.tobytes() + b"\n",
            b"LONG?": lambda: b"#9999999999",
            b"TEXT?": lambda: b"-113,oops\n",
            b"UNTERMINATED?": lambda: b"#15hello!",
            b"LATE?": lambda: (time.sleep(3 * SHORT_S), b"late\n")[1],
        }
        with suppress(OSError), wire, wire.makefile("rb") as lines:
            for line in lines:
                if line.strip() == b"DROP?":
                    return
                answer = answers.get(line.strip())
                if answer is not None:
                    wire.sendall(answer())

    def close(self) -> None:
        self._listener.close()


@pytest.fixture
def talker() -> Iterator[Talker]:
    one = Talker()
    yield one
    one.close()


def link_to(talker: Talker, events: list[Event], beat: Callable[[], None] = lambda: None) -> Link:
    resource = f"TCPIP::127.0.0.1::{talker.port}::SOCKET"
    link = Link("attenuator", resource, events.append, ManualClock(), beat=beat)
    link.open(1.0)
    return link


def test_block_comes_whole_and_is_logged_as_hash(talker: Talker) -> None:
    events: list[Event] = []
    link = link_to(talker, events)
    got = link.query_block("BLOCK?", DATA.size, 2.0)
    assert np.array_equal(got, DATA)
    exchange = events[-1]
    assert isinstance(exchange, Exchange)
    assert (exchange.sent, exchange.received, exchange.block_bytes) == ("BLOCK?", "", DATA.size)
    assert exchange.block_sha256 == hashlib.sha256(DATA.tobytes()).hexdigest()
    assert link.query("*IDN?", 1.0) == "maker,model,SN1,1.0"  # nothing of the block is left in the stream


@pytest.mark.parametrize(
    "question", ["LATE?", "SILENCE?", "CUT?", "ENDLESS?", "LONG?", "TEXT?", "UNTERMINATED?", "DROP?"]
)
def test_after_any_fault_answers_belong_to_questions(talker: Talker, question: str) -> None:
    events: list[Event] = []
    link = link_to(talker, events)
    with pytest.raises(LinkError) as trouble:
        if question in ("CUT?", "ENDLESS?", "LONG?", "TEXT?", "UNTERMINATED?"):
            link.query_block(question, DATA.size, SHORT_S)
        else:
            link.query(question, SHORT_S)
    assert trouble.value.maybe_executed and trouble.value.role == "attenuator"
    last = events[-1]
    assert isinstance(last, Exchange) and last.trouble and last.maybe_executed
    with pytest.raises(LinkError, match="not open"):
        link.query("*IDN?", SHORT_S)
    time.sleep(4 * SHORT_S if question == "LATE?" else 0)  # the late answer arrives at nobody
    link.reopen(1.0)
    assert [link.query("*IDN?", 1.0) for _ in range(3)] == ["maker,model,SN1,1.0"] * 3


def test_dropped_connection_is_noticed_at_once(talker: Talker) -> None:
    link = link_to(talker, [])
    began = time.monotonic()
    with pytest.raises(LinkError, match="closed the connection"):
        link.query("DROP?", 5.0)
    assert time.monotonic() - began < 1.0  # not at the time-out of 5 s


def test_reopening_proves_the_same_instrument(talker: Talker) -> None:
    link = link_to(talker, [])
    talker.identity = b"maker,model,SN2,1.0"
    with pytest.raises(LinkError, match="SN1"):
        link.reopen(1.0)
    assert not link.healthy


@pytest.mark.parametrize("resource", ["TCPIP::127.0.0.1::{}::SOCKET", "TCPIP::127.0.0.1::hislip0,{}::INSTR"])
def test_nobody_there_is_noticed_at_opening(resource: str) -> None:
    with socket.create_server(("127.0.0.1", 0)) as gone:
        port = gone.getsockname()[1]
    link = Link("power_meter", resource.format(port), [].append, ManualClock())
    with pytest.raises(LinkError) as trouble:
        link.open(1.0)
    assert trouble.value.role == "power_meter"
    words = str(trouble.value)
    assert "power_meter" in words and resource.format(port) in words and "could not be opened: " in words
    assert "; nothing was sent to it. Check address, cable and power." in words
    assert "Error:" not in words and "Errno" not in words and not trouble.value.maybe_executed


def test_silent_instrument_was_asked_its_name() -> None:
    with socket.create_server(("127.0.0.1", 0)) as silent:
        resource = f"TCPIP::127.0.0.1::{silent.getsockname()[1]}::SOCKET"
        link = Link("power_meter", resource, [].append, ManualClock())
        with pytest.raises(LinkError, match=r"no answer in time; nothing but \*IDN\? was sent to it") as trouble:
            link.open(SHORT_S)
    assert trouble.value.maybe_executed


def test_no_address_is_told_as_such() -> None:
    with pytest.raises(LinkError, match="this is no address of an instrument"):
        Link("power_meter", "nonsense", [].append, ManualClock()).open(1.0)


def test_later_fault_has_words_before_numbers() -> None:
    def silent(resource: str, deadline_s: float) -> Session:
        return Silent()

    class Silent:
        def write(self, message: str, deadline_s: float) -> None:
            if message != "*IDN?":
                raise pyvisa.errors.VisaIOError(pyvisa.constants.StatusCode.error_timeout)

        def read(self, deadline_s: float) -> str:
            return "maker,model,SN1,1.0"

        def abort(self) -> None: ...

        close = abort

    link = Link("laser", "somewhere", [].append, ManualClock(), opener=silent)
    link.open(1.0)
    with pytest.raises(LinkError, match=r"failed at 'OUTP ON': no answer in time \(VI_ERROR_TMO\)\. The session is"):
        link.write("OUTP ON", 1.0)


def test_waiting_beats_and_stop_passes_through(talker: Talker) -> None:
    class Stop(BaseException):
        pass

    def beat() -> None:
        raise Stop

    link = link_to(talker, [], beat)
    with pytest.raises(Stop):
        link.query("SILENCE?", 5.0)
    assert not link.healthy and link.abandoned == 1


def test_deaf_session_is_abandoned_in_time() -> None:
    asleep = threading.Event()

    class Deaf:
        def write(self, message: str, deadline_s: float) -> None:
            if message != "*IDN?":
                asleep.wait()

        def read(self, deadline_s: float) -> str:
            return "a,b,c,d"

        def query_block(self, message: str, most_bytes: int, terminator_after: bool, deadline_s: float) -> np.ndarray:
            raise AssertionError

        def abort(self) -> None:
            asleep.set()

        def close(self) -> None:
            pass

    link = Link("x", "deaf", [].append, ManualClock(), lambda resource, deadline_s: Deaf())
    link.open()
    began = time.monotonic()
    with pytest.raises(LinkError, match="no end within"):
        link.write("ANYTHING", SHORT_S)
    assert time.monotonic() - began < 1.0
    assert link.abandoned == 1 and asleep.wait(1.0)


def test_failing_emit_leaves_the_link_usable() -> None:
    full = [False]

    def emit(event: Event) -> None:
        if full[0]:
            raise OSError("disk full")

    link = Link("x", "here", emit, ManualClock(), memory_opener({"here": lambda message: b"a,b,c,d\n"}))
    link.open()
    full[0] = True
    with pytest.raises(OSError, match="disk full"):
        link.query("*IDN?", 1.0)
    full[0] = False
    assert link.query("*IDN?", 1.0) == "a,b,c,d"


def test_memory_link_refuses_unknown_address() -> None:
    link = Link("x", "elsewhere", [].append, ManualClock(), memory_opener({}))
    with pytest.raises(LinkError, match="nobody answers") as trouble:
        link.open()
    assert not trouble.value.maybe_executed


def test_stamps_count_strictly_up() -> None:
    events: list[Event] = []
    link = Link("x", "here", events.append, ManualClock(), memory_opener({"here": lambda message: b"a,b,c,d\n"}))
    link.open()
    for _ in range(5):
        link.query("*IDN?", 1.0)
    counts = [event.at.count for event in events if isinstance(event, Exchange)]
    assert counts == sorted(set(counts)) and len(counts) == 6
