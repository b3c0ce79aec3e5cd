"""The verbs that touch a bench without measuring: whether it is simulated is said, and what was not touched."""

from __future__ import annotations

import re
import socket
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from owlight import shipped, simulation
from owlight.cli.result import print_safe_state
from owlight.instrument.instrument import Instrument
from owlight.jobs.identify import identify
from owlight.jobs.safe import make_safe

TEXT = shipped.find("simulated_instruments", "bench").read_text("utf-8")


def bench_at(folder: Path, addresses: dict[str, str]) -> str:
    """The demo bench with plain addresses, as a real one has them."""
    text, found = re.subn(r"(?m)^\[simulation\]\n[^\[]*", "", TEXT)
    assert found == 1
    for role, address in addresses.items():
        text, found = re.subn(rf'(\[role\.{role}\][^\[]*?resource = )"[^"]*"', rf'\1"{address}"', text)
        assert found == 1, role
    path = folder / "plain.toml"
    path.write_text(text, "utf-8")
    return str(path)


@pytest.fixture(scope="module")
def served(tmp_path_factory: pytest.TempPathFactory) -> Iterator[str]:
    running = simulation.start(shipped.find("simulated_instruments", "world"), stepped=False)
    yield bench_at(tmp_path_factory.mktemp("bench"), {name: at["socket"] for name, at in running.resources.items()})
    running.stop()


@pytest.fixture(scope="module")
def dead(tmp_path_factory: pytest.TempPathFactory) -> str:
    with socket.create_server(("127.0.0.1", 0)) as gone:
        address = f"TCPIP::127.0.0.1::{gone.getsockname()[1]}::SOCKET"
    return bench_at(tmp_path_factory.mktemp("dead"), dict.fromkeys(re.findall(r"\[role\.(\w+)\]", TEXT), address))


def test_whoever_answers_may_be_simulated(served: str) -> None:
    found = identify(served)
    assert found["simulated"] is True and len(found["instruments"]) == len(re.findall(r"\[role\.", TEXT))
    assert all(answer["as_planned"] for answer in found["instruments"])
    safe = make_safe(served)
    assert safe["confirmed"] and safe["simulated"] is True
    assert safe["words"] == ""  # it is this one that was made safe


def test_instrument_without_serial_number_is_taken_on_trust(served: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """As a run and the guard take it; that nothing proves it is said."""
    told = Instrument.identify
    for serial in ("0", "", "OWL-XX-0009"):
        monkeypatch.setattr(Instrument, "identify", lambda self, s=serial: replace(told(self), serial_number=s))
        answers = identify(served)["instruments"]
        assert all(answer["as_planned"] is (serial != "OWL-XX-0009") for answer in answers)
        assert all(("rests on the bench file alone" in a["words"]) is a["as_planned"] for a in answers)


def test_fresh_simulation_is_told_from_the_bench() -> None:
    found = make_safe("bench")
    assert found["confirmed"] and found["simulated"] is True
    assert "served elsewhere is not touched" in found["words"]


def test_silent_bench_is_not_called_simulated(dead: str, capsys: Any) -> None:
    assert identify(dead)["simulated"] is False
    found = make_safe(dead)
    assert not found["confirmed"] and found["simulated"] is False and found["words"] == ""
    print_safe_state(found)
    lines = capsys.readouterr().out.splitlines()
    asked = [line for line in lines if "UNCONFIRMED" in line]
    # each reason begins a line of its own, below what was asked
    assert len(asked) == 3 and all("could not be opened" not in line for line in asked)
    assert (
        " ".join(" ".join(lines).split()).count("could not be opened: connection refused; nothing was sent to it") == 3
    )

    told = found["steps"][0]["words"].partition(": ")[2]  # as `run` gives it as its reason
    print_safe_state(found, told)
    assert " ".join(capsys.readouterr().out.split()).count("could not be opened") == 2
