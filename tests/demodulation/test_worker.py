"""The process of its own: same counts, and it does not outlive whoever started it."""

from __future__ import annotations

import multiprocessing
import os
import subprocess
import sys
import time
from concurrent.futures import ProcessPoolExecutor
from dataclasses import replace

import pytest

from owlight.demodulation import demodulate, make_chain, worker

ORPHAN = """
import multiprocessing, os, sys
from concurrent.futures import ProcessPoolExecutor
from owlight.demodulation import worker
if __name__ == "__main__":
    pool = ProcessPoolExecutor(1, multiprocessing.get_context("spawn"), worker.initialise)
    print(pool.submit(os.getpid).result(), flush=True)
    os._exit(0)
"""


def test_worker_counts_the_same(transmission, chain_of, ideal):
    link = replace(ideal, symbols=16_000, seed=21, snr_db=8.0, offset_hz=150e6, linewidth_hz=100e3)
    capture, chain = transmission(link).capture, chain_of(link)
    text = make_chain(chain.name, chain.signal, chain.lanes, None).text
    with ProcessPoolExecutor(1, multiprocessing.get_context("spawn"), worker.initialise) as pool:
        found = pool.submit(worker.demodulate_text, capture, text).result()
    here = demodulate(capture, chain)
    # libraries of linear algebra round differently by the number of their threads; counts do not follow that
    assert [(t.name, t.errors, t.bits) for t in found.tributaries] == [
        (t.name, t.errors, t.bits) for t in here.tributaries
    ]
    assert found.snr_db == pytest.approx(here.snr_db, abs=1e-3)


def test_worker_ends_with_its_parent(tmp_path):
    script = tmp_path / "parent.py"
    script.write_text(ORPHAN)
    told = subprocess.run([sys.executable, str(script)], stdout=subprocess.PIPE, text=True, check=True, timeout=60)
    orphan, deadline = int(told.stdout), time.monotonic() + 10
    while alive(orphan) and time.monotonic() < deadline:
        time.sleep(0.05)
    assert not alive(orphan)


def alive(pid):
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return False
    with open(f"/proc/{pid}/stat", encoding="ascii") as stat:  # an unreaped one is dead all the same
        return stat.read().rsplit(")", 1)[1].split()[0] != "Z"
