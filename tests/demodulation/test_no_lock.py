"""Without lock there is no number: only a reason, and where it is known, what to look at."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from owlight.demodulation import demodulate
from owlight.errors import InputError
from owlight.statistics.checks import stay as checks


@pytest.fixture(scope="module")
def link(ideal):
    return replace(ideal, symbols=16_000, seed=31, snr_db=10.0, offset_hz=150e6)


def assert_no_number(found):
    assert found.status == "no lock"
    assert found.tributaries == ()
    assert (found.snr_db, found.evm_percent, found.gmi_bits) == (None, None, None)
    assert not any("ber" in name for stage in found.stages for name in stage.figures)


@pytest.mark.parametrize("seed", range(32, 36))
def test_noise_gives_no_lock(transmission, chain_of, link, seed):
    found = demodulate(transmission(replace(link, noise_only=True, seed=seed)).capture, chain_of(link))
    assert_no_number(found)
    assert "best correlation 0.0" in found.reason


@pytest.mark.parametrize("order", [9, 11])
def test_another_pattern_gives_no_lock(transmission, chain_of, link, order):
    found = demodulate(transmission(link).capture, chain_of(link, order=order))
    assert_no_number(found)
    assert "the pattern was not found" in found.reason


def test_another_symbol_rate_gives_no_lock(transmission, chain_of, link):
    assert_no_number(demodulate(transmission(link).capture, chain_of(link, symbol_rate_bd=25e9)))


def test_record_too_short_gives_no_lock(transmission, chain_of, link):
    capture = transmission(link).capture
    short = replace(capture, lanes=tuple(replace(lane, codes=lane.codes[:4000]) for lane in capture.lanes))
    found = demodulate(short, chain_of(link))
    assert_no_number(found)
    assert "2000 are needed" in found.reason


def test_dead_lane_gives_no_lock(transmission, chain_of, link):
    capture = transmission(link).capture
    dead = (replace(capture.lanes[0], codes=np.zeros_like(capture.lanes[0].codes)), *capture.lanes[1:])
    assert_no_number(demodulate(replace(capture, lanes=dead), chain_of(link)))


def test_exchanged_lanes_are_named(transmission, chain_of, link):
    lanes = transmission(link).capture.lanes
    swapped = (replace(lanes[1], name="XI"), replace(lanes[0], name="XQ"), *lanes[2:])
    found = demodulate(replace(transmission(link).capture, lanes=swapped), chain_of(link))
    assert (found.status, found.reason) == ("locked", "XI and XQ are exchanged, or one of them is inverted")


def test_delays_off_plan_are_named(transmission, chain_of, link, figures_of):
    found = demodulate(transmission(link).capture, chain_of(link, offsets=(0, 3178, 9760, 10955)))
    assert found.status == "locked"
    assert figures_of(found)["off_plan_symbols"] == pytest.approx(100, abs=16)
    assert "differ from the plan" in found.reason


def test_missing_lane_is_refused(transmission, chain_of, link):
    capture = transmission(link).capture
    with pytest.raises(InputError, match="also needs YQ"):
        demodulate(replace(capture, lanes=capture.lanes[:3]), chain_of(link))


@pytest.mark.parametrize("labels", [np.zeros((1, 50), int), np.full((2, 50), 7), np.zeros((2, 0), int)])
def test_useless_labels_are_refused(transmission, chain_of, link, labels):
    with pytest.raises(InputError, match="reference cannot be used"):
        demodulate(transmission(link).capture, chain_of(link), labels)


@pytest.mark.parametrize(
    ("offsets", "finding"), [((0, 3178, 9760, 10855), "ok"), ((0, 3178, 9760, 10955), "bad"), ((), "not evaluated")]
)
def test_lane_map_is_judged_against_the_plan(transmission, chain_of, link, offsets, finding):
    found = demodulate(transmission(link).capture, chain_of(link, offsets=offsets))
    assert {c.name: c.finding for c in checks.demodulation(found)}["lane map"] == finding
