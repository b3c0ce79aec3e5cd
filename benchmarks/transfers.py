"""How fast a record comes over the wire, beside a bare socket loop and beside the back end's own block query.

python benchmarks/transfers.py. A small server in a process of its own sends the same record over a raw socket and over
HiSLIP, so that only the reading side differs. Patterns take turns, so that a machine that gets busy slows all of them;
what a quarter of the turns beat is compared, since other work only ever slows. The record is what a converter makes of
a Gaussian signal with 4 sigma to the rail.
Goals: HiSLIP at least 0.8 of the bare loop; blocks by exact length at least 10 times the default query on a socket.
"""

from __future__ import annotations

import logging
import socket
import statistics
import struct
import subprocess
import sys
import threading
import time
from collections.abc import Callable

import numpy as np
import pyvisa

from owlight.clock import WallClock
from owlight.link import Link, open_visa

SAMPLES = 4 << 20
TURNS = 40
HISLIP_GOAL, SOCKET_GOAL = 0.8, 10.0
QUESTION = "FETC?"
IDENTITY = b"maker,oscilloscope,1,1.0\n"
_HISLIP = struct.Struct("!2sBBIQ")
_LARGEST_MESSAGE = 1 << 20


# ---- the server's process ----


def record() -> bytes:
    noise = np.random.default_rng(1).normal(0, 32, SAMPLES)
    return np.clip(np.round(noise), -128, 127).astype(np.int8).tobytes()


def serve() -> None:
    """Two ports on one line, then answers until standard input ends."""
    codes = record()
    answers = {b"*IDN?": IDENTITY, QUESTION.encode(): b"#9%09d" % len(codes) + codes + b"\n"}
    ports = [listen(lambda wire: talk_raw(wire, answers)), listen(lambda wire: talk_hislip(wire, answers))]
    print(*ports, flush=True)
    sys.stdin.read()


def listen(talk: Callable[[socket.socket], None]) -> int:
    listener = socket.create_server(("127.0.0.1", 0), backlog=128)

    def accept() -> None:
        while True:
            wire, _ = listener.accept()
            wire.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
            threading.Thread(target=talk, args=(wire,), daemon=True).start()

    threading.Thread(target=accept, daemon=True).start()
    return int(listener.getsockname()[1])


def talk_raw(wire: socket.socket, answers: dict[bytes, bytes]) -> None:
    for line in wire.makefile("rb"):
        wire.sendall(answers[line.strip()])


def talk_hislip(wire: socket.socket, answers: dict[bytes, bytes]) -> None:
    """As little of HiSLIP 1.0 (IVI-6.1) as a session needs: two initialisations, the largest message, data."""

    def send(kind: int, parameter: int, payload: bytes | memoryview = b"") -> None:
        wire.sendall(_HISLIP.pack(b"HS", kind, 0, parameter, len(payload)))
        wire.sendall(payload)

    incoming = wire.makefile("rb")
    while header := incoming.read(_HISLIP.size):
        _, kind, _, parameter, length = _HISLIP.unpack(header)
        payload = incoming.read(length)
        if kind in (0, 17):  # Initialize, AsyncInitialize
            send(kind + 1, 0x0100_0001 if kind == 0 else 0)
        elif kind == 15:  # AsyncMaxMsgSize
            send(16, 0, struct.pack("!Q", _LARGEST_MESSAGE))
        elif kind == 7:  # DataEnd
            answer = memoryview(answers[payload.strip()])
            for start in range(0, len(answer), _LARGEST_MESSAGE):
                last = start + _LARGEST_MESSAGE >= len(answer)
                send(7 if last else 6, parameter, answer[start : start + _LARGEST_MESSAGE])


# ---- the reading side ----


def bare(port: int) -> Callable[[], int]:
    """The bound: `recv_into` a new buffer, at most 1 MiB a call."""
    wire = socket.create_connection(("127.0.0.1", port))
    wanted = 11 + SAMPLES + 1

    def fetch() -> int:
        wire.sendall(QUESTION.encode() + b"\n")
        buffer = memoryview(bytearray(wanted))
        got = 0
        while got < wanted:
            got += wire.recv_into(buffer[got : got + (1 << 20)])
        return np.frombuffer(buffer, np.int8, SAMPLES, 11).size

    return fetch


def session(resource: str) -> Callable[[], int]:
    """Our pattern alone."""
    opened = open_visa(resource, 5.0)
    return lambda: int(opened.query_block(QUESTION, SAMPLES, True, 60.0).size)


def link(resource: str) -> Callable[[], int]:
    """The same with the link's thread and the hash that the logbook keeps of every block."""
    opened = Link("oscilloscope", resource, lambda event: None, WallClock())
    opened.open()
    return lambda: int(opened.query_block(QUESTION, SAMPLES, 60.0).size)


def default_query(resource: str) -> Callable[[], int]:
    """What a script would write first."""
    instrument = pyvisa.ResourceManager("@py").open_resource(
        resource, read_termination="\n", write_termination="\n", timeout=60_000
    )
    return lambda: int(instrument.query_binary_values(QUESTION, datatype="b", container=np.ndarray).size)


def measure(patterns: dict[str, Callable[[], int]]) -> dict[str, float]:
    """Rates in bytes a second at the lower quartile of the times; the slow pattern gets fewer turns."""
    seconds: dict[str, list[float]] = {name: [] for name in patterns}
    for turn in range(TURNS + 1):
        for name, fetch in patterns.items():
            if "default" in name and turn > 5:
                continue
            began = time.perf_counter()
            assert fetch() == SAMPLES
            if turn:  # the first turn warms up
                seconds[name].append(time.perf_counter() - began)
    return {name: SAMPLES / statistics.quantiles(times, n=4)[0] for name, times in seconds.items()}


def main() -> int:
    logging.getLogger("pyvisa").setLevel(logging.ERROR)
    command = [sys.executable, __file__, "--serve"]
    with subprocess.Popen(command, stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True) as server:
        assert server.stdout is not None and server.stdin is not None
        raw, hislip = (int(port) for port in server.stdout.readline().split())
        raw_resource, hislip_resource = f"TCPIP::127.0.0.1::{raw}::SOCKET", f"TCPIP::127.0.0.1::hislip0,{hislip}::INSTR"
        rates = measure(
            {
                "bare socket, recv_into": bare(raw),
                "HiSLIP, block query": session(hislip_resource),
                "HiSLIP, link and hash": link(hislip_resource),
                "SOCKET, exact length": session(raw_resource),
                "SOCKET, link and hash": link(raw_resource),
                "SOCKET, default query": default_query(raw_resource),
            }
        )
        server.stdin.close()
    return report(rates)


def report(rates: dict[str, float]) -> int:
    print(f"a record of {SAMPLES / 1e6:.1f} MB, {TURNS} turns, lower quartiles of the times")
    for name, rate in rates.items():
        print(f"{name:26} {rate / 1e6:8.0f} MB/s")
    hislip = rates["HiSLIP, block query"] / rates["bare socket, recv_into"]
    exact = rates["SOCKET, exact length"] / rates["SOCKET, default query"]
    print(f"{'HiSLIP over bare socket':26} {hislip:8.2f}  goal {HISLIP_GOAL}")
    print(f"{'exact over default query':26} {exact:8.1f}  goal {SOCKET_GOAL:.0f}")
    return 0 if hislip >= HISLIP_GOAL and exact >= SOCKET_GOAL else 1


if __name__ == "__main__":
    if "--serve" in sys.argv:
        serve()
    else:
        sys.exit(main())
