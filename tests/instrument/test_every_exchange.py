"""One fault at every exchange of a measurement: it is never taken for a success, and the bench ends dark."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from itertools import count
from pathlib import Path

import pytest

from owlight.bench import LightState
from owlight.errors import BenchError
from owlight.instrument.open_bench import OpenBench
from owlight.vocabulary.captures import CaptureId
from owlight.vocabulary.plan import CaptureRequest
from owlight.vocabulary.terms import ROLES
from owlight.vocabulary.values import Reading, Term

REQUEST = CaptureRequest(2_000, 80e9, 2_000, ("XI", "XQ", "YI", "YQ"), "fixed", "all")
EVERY = 7  # from one fault to the next; 1 takes a minute and was run by hand: 3 x 223 exchanges, nothing else passes


def measure(bench: OpenBench) -> None:
    bench.set(Term("pattern_source", "output"), True)
    bench.set(Term("oscilloscope", "record_length"), 2_000)
    for channel in range(1, 5):
        bench.set(Term("oscilloscope", f"range_{channel}"), 0.2)
    bench.set_wavelength(1550.12, 1550.12)
    bench.zero_meter()
    bench.light_up(LightState(True, 10.0, True, 11.0))
    bench.set_received_power(-36.0)
    bench.capture(CaptureId(0, 1, 1), 1, 0.0, REQUEST)
    bench.read(Term("power_meter", "power"), count=3, phase="after")


def spoil_one(number: int, answer: bytes) -> Callable[[bytes], bytes | None]:
    """Answer the exchange of this number with something else, and do not let the instrument hear it."""
    seen: Iterator[int] = count()
    return lambda message: answer if next(seen) == number else None


def exchanges(join_with, tmp_path: Path) -> int:
    joined = join_with()
    with joined.open(tmp_path) as bench:
        joined.heard.clear()
        measure(bench)
        return len(joined.heard)


@pytest.mark.parametrize("answer", [b"", b"@!\n", b"9.91E37\n"], ids=["silence", "garbage", "not a number"])
def test_no_fault_passes_for_success_and_all_end_dark(answer: bytes, join_with, tmp_path: Path) -> None:
    whole = exchanges(join_with, tmp_path)
    assert whole > 150
    for number in range(0, whole, EVERY):
        joined = join_with()
        bench = joined.open(tmp_path)
        spoil = spoil_one(number, answer)
        joined.spoil.update(dict.fromkeys(ROLES, spoil))
        try:
            measure(bench)
            # only a reading that says of itself that it is no number may pass: it enters nothing
            assert answer == b"9.91E37\n"
            assert [e for e in joined.events if isinstance(e, Reading) and e.value is None]
        except BenchError as trouble:
            assert str(trouble)
        safe = bench.make_safe()
        assert safe.confirmed, f"exchange {number}"
        bench.close()
        assert joined.simulated["signal_laser"].value("output") is False
        assert joined.simulated["local_oscillator"].value("output") is False
        assert joined.simulated["attenuator"].value("attenuation") == 60.0
        assert joined.truth.damaged == frozenset()
