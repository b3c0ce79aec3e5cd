"""Where the time of one demo goes, and how far each part is from what it cannot do without.

python benchmarks/demo_phases.py. One demo runs as a user would run it; the runner's calls are timed, each moment
counted once, for the innermost call. A simulated record is computed when the stepped time comes to it. Demodulation
runs beside the measurement in a process of its own: only what the runner waited for it counts. Bounds are measured
after the demo, in the same process: the bare Fourier transforms of one simulated record and of one demodulation, of
the same sizes and kinds; the same bytes through a bare socket; the same bytes in a plain file, durable once a stay.
"""

from __future__ import annotations

import os
import socket
import statistics
import sys
import tempfile
import threading
import time
from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # as in the processes of a demo

import numpy as np
import scipy.fft

TURNS = 9
KINDS = ("fft", "ifft", "rfft", "irfft")


class Transforms:
    """Writes down every transform that is asked for, so that the same can be done again with nothing around it."""

    def __init__(self) -> None:
        self.seen: list[tuple[Callable[..., Any], Any, Any, dict[str, Any]]] = []
        for kind in KINDS:
            setattr(scipy.fft, kind, self._noting(getattr(scipy.fft, kind)))

    def _noting(self, real: Callable[..., Any]) -> Callable[..., Any]:
        def noted(x: Any, *more: Any, **options: Any) -> Any:
            self.seen.append((real, (np.shape(x), np.asarray(x).dtype), more, options))
            return real(x, *more, **options)

        return noted

    def of(self, work: Callable[[], object]) -> Callable[[], None]:
        """The transforms of `work`, bare."""
        self.seen.clear()
        work()
        ready = [(real, np.ones(shape, dtype), more, options) for real, (shape, dtype), more, options in self.seen]

        def bare() -> None:
            for real, x, more, options in ready:
                real(x, *more, **options)

        return bare


TRANSFORMS = Transforms()  # before any room takes the functions for its own


class Shares:
    """Seconds by phase; a call inside another counts for itself only."""

    def __init__(self) -> None:
        self.seconds: Counter[str] = Counter()
        self._open: list[str] = ["the rest"]
        self._since = time.perf_counter()

    def _turn(self) -> None:
        now = time.perf_counter()
        self.seconds[self._open[-1]] += now - self._since
        self._since = now

    def time(self, phase: str, owner: Any, name: str) -> None:
        real = getattr(owner, name)

        def timed(*arguments: Any, **options: Any) -> Any:
            if threading.current_thread() is not threading.main_thread():
                return real(*arguments, **options)
            self._turn()
            self._open.append(phase)
            try:
                return real(*arguments, **options)
            finally:
                self._turn()
                self._open.pop()

        setattr(owner, name, timed)


def watch(shares: Shares) -> None:
    from owlight import simulation
    from owlight.jobs import night
    from owlight.link import Link
    from owlight.logbook import Logbook, RunWriter
    from owlight.run import waiting
    from owlight.simulation.control import Control

    for name in ("open", "write", "query"):
        shares.time("simulation, answering", Link, name)
    shares.time("simulation, as time passes", Control, "ask")
    shares.time("simulation, starting", simulation, "start")
    shares.time("transfer of records", Link, "query_block")
    for name in ("record", "conclude", "close"):
        shares.time("storage", RunWriter, name)
    shares.time("storage", Logbook, "open")
    shares.time("storage", Logbook, "start_run")
    shares.time("waiting for demodulation", waiting._Asked, "result")
    shares.time("statistics", night, "conclude")


@dataclass(frozen=True)
class Demo:
    folder: Path
    run_id: str
    seconds: float
    shares: Counter[str]


def demo(folder: Path) -> Demo:
    from owlight.jobs.night import Order, measure
    from owlight.jobs.resolve import resolve, world_path

    resolved = resolve("qpsk_sensitivity", "bench")
    shares = Shares()
    watch(shares)
    began = time.perf_counter()
    shares._since = began
    run_id = measure(resolved, Order(folder, world_path("bench", resolved.bench), "demo_phases")).run_id
    shares._turn()
    return Demo(folder, run_id, time.perf_counter() - began, shares.seconds)


def typical_s(work: Callable[[], object]) -> float:
    """The lower quartile: other work on the machine only ever slows."""
    times = []
    for _ in range(TURNS):
        began = time.perf_counter()
        work()
        times.append(time.perf_counter() - began)
    return statistics.quantiles(times, n=4)[0]


def one_record(record_length: int) -> Callable[[], object]:
    """A record like those of the demo, at its middle power."""
    from owlight import shipped
    from owlight.simulation.optics import LightSettings, capture_codes
    from owlight.simulation.world import read_world

    path = shipped.find("simulated_instruments", "world")
    world = read_world(path.read_text("utf-8"), str(path)).value
    assert world is not None
    settings = LightSettings(
        signal_on=True, signal_power_dbm=10.0, signal_wavelength_nm=1550.12,
        lo_on=True, lo_power_dbm=13.0, lo_wavelength_nm=1550.12,
        attenuation_db=30.0, drive_on=True, modulation="QPSK", symbol_rate_bd=32e9, polarisations=2, rolloff=0.1,
        pattern_order=15, offsets=(0, 3178, 9760, 10855), sample_rate_hz=80e9, record_length=record_length,
        ranges_v=(0.3,) * 4, coupling="AC", bias=True, gain_db=0.0, gain_control="manual",
    )  # fmt: skip
    return lambda: capture_codes(world, settings, 1, 0.0)


def plain_file(folder: Path, sizes: list[int]) -> None:
    """As many bytes as durably, once a stay."""
    with (folder / "plain").open("wb") as file:
        for size in sizes:
            file.write(b"\xa5" * size)
            file.flush()
            os.fsync(file.fileno())


def bare_socket(record: bytes) -> None:
    left, right = socket.socketpair()
    with left, right:
        sender = threading.Thread(target=left.sendall, args=(record,))
        sender.start()
        buffer, got = memoryview(bytearray(len(record))), 0
        while got < len(record):
            got += right.recv_into(buffer[got : got + (1 << 20)])
        sender.join()


@dataclass(frozen=True)
class Line:
    """A part of one stay's work, beside its bound."""

    name: str
    seconds: float
    bound: str
    bound_s: float


def lines(done: Demo, folder: Path) -> list[Line]:
    from owlight.demodulation.chain import Chain
    from owlight.demodulation.journey import demodulate
    from owlight.logbook import read
    from owlight.logbook.read import captures, history, provenance

    with read.open_reader(done.folder) as reader:
        stays = history.history(reader, done.run_id)
        plan = provenance.plan(reader, done.run_id)
        first = next(each for stay in stays for each in stay.demodulations if each.status == "locked").capture
        capture = captures.load(done.folder, done.run_id, first)
    assert plan.chain is not None
    chain = Chain.from_text(plan.chain.text)
    lane_bytes = capture.lanes[0].codes.nbytes
    whole, count = b"\xa5" * (lane_bytes * len(capture.lanes)), len(stays)
    record, demodulation = one_record(len(capture.lanes[0].codes)), lambda: demodulate(capture, chain)
    record(), demodulation()  # the first calls load and prepare
    shares, fft = done.shares, "its bare transforms"
    kept = sum(path.stat().st_size for path in done.folder.rglob("*") if path.is_file())
    plain_s = typical_s(lambda: plain_file(folder, [kept // count] * count))
    return [
        Line("simulating a record", typical_s(record), fft, typical_s(TRANSFORMS.of(record))),
        Line("demodulating it", typical_s(demodulation), fft, typical_s(TRANSFORMS.of(demodulation))),
        Line("transfer", shares["transfer of records"] / count, "bare socket", typical_s(lambda: bare_socket(whole))),
        Line("storage", shares["storage"] / count, "plain file, durable", plain_s / count),
    ]


def main() -> int:
    from owlight import shipped

    shipped.numba_cache()
    with tempfile.TemporaryDirectory() as place:
        folder = Path(place)
        done = demo(folder / "logbook")
        print(f"one demo: {done.seconds:.1f} s, without set-up")
        for name, seconds in done.shares.most_common():
            print(f"  {name:28} {seconds:6.1f} s  {100 * seconds / done.seconds:5.1f} %")
        print(f"{'a stay':24} {'ms':>7}  {'bound':22} {'ms':>7}  ratio")
        for line in lines(done, folder):
            took_ms, bound_ms = 1e3 * line.seconds, 1e3 * line.bound_s
            print(f"{line.name:24} {took_ms:7.1f}  {line.bound:22} {bound_ms:7.1f}  {took_ms / bound_ms:5.1f}")
    return 0


if __name__ == "__main__":
    sys.exit(main())
