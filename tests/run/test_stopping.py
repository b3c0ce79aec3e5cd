"""Stopping once, twice, and by a file from another shell."""

from __future__ import annotations

import os
import signal
from pathlib import Path

import pytest

from owlight.clock import ManualClock
from owlight.errors import StopNow
from owlight.run.attended import AttendedClock, StopRequests


def attended(stop: StopRequests, beats: list[int] | None = None) -> AttendedClock:
    heard = beats if beats is not None else []
    return AttendedClock(ManualClock(), stop, lambda: heard.append(1), real_time=True)


def test_first_request_lets_waits_finish() -> None:
    stop = StopRequests()
    stop.ask()
    clock = attended(stop)
    clock.sleep(5.0)
    assert clock.monotonic_s() == pytest.approx(5.0)


def test_second_request_ends_a_wait() -> None:
    stop = StopRequests()
    stop.ask()
    stop.ask()
    with pytest.raises(StopNow):
        attended(stop).sleep(5.0)


def test_waits_beat_the_guard_often() -> None:
    beats: list[int] = []
    attended(StopRequests(), beats).sleep(5.0)
    assert len(beats) >= 50  # slices of at most 100 ms


def test_stop_file_asks_at_once(tmp_path: Path) -> None:
    stop = StopRequests(tmp_path / "run.stop")
    clock = attended(stop)
    clock.sleep(1.0)
    (tmp_path / "run.stop").touch()
    with pytest.raises(StopNow):
        clock.sleep(1.0)


def test_safe_state_is_not_interrupted() -> None:
    stop = StopRequests()
    stop.ask(at_least=2)
    clock = attended(stop)
    clock.only_beat()
    clock.sleep(1.0)
    assert clock.monotonic_s() == pytest.approx(1.0)


def test_signals_count_and_are_handed_back() -> None:
    said: list[str] = []
    stop = StopRequests(say=said.append)
    before = signal.getsignal(signal.SIGINT)
    with stop.on_signals():
        os.kill(os.getpid(), signal.SIGINT)
        assert stop.level == 1
        os.kill(os.getpid(), signal.SIGTERM)
        assert stop.level == 2
    assert signal.getsignal(signal.SIGINT) is before
    stop.look()
    stop.look()
    assert said == ["Making the bench safe now."]


def test_signal_inside_a_printed_line_waits(tmp_path: Path) -> None:
    """A stream that is written to from a handler while it is being written to raises, and a night would end of it."""
    with (tmp_path / "screen").open("w", encoding="utf-8") as screen:
        speaking: list[str] = []

        def say(words: str) -> None:
            assert not speaking, "spoken to in the middle of a line"
            speaking.append(words)
            os.kill(os.getpid(), signal.SIGINT)
            print(speaking.pop(), file=screen, flush=True)

        stop = StopRequests(say=say)
        with stop.on_signals():
            stop.ask()
            stop.look()
    assert stop.level == 2
    assert (tmp_path / "screen").read_text("utf-8").startswith("Finishing this point")
