"""What must not change the counts: delay, carrier phase, polarisation, order and sign of lanes. And exact counting."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from owlight.demodulation import demodulate

NAMES = ("XI", "XQ", "YI", "YQ")


@pytest.fixture(scope="module")
def link(ideal):
    return replace(ideal, symbols=16_000, seed=21, snr_db=8.0, offset_hz=150e6, linewidth_hz=100e3)


@pytest.fixture(scope="module")
def counted(transmission, chain_of, link):
    return demodulate(transmission(link).capture, chain_of(link))


def with_codes(capture, codes):
    lanes = tuple(replace(lane, codes=c) for lane, c in zip(capture.lanes, codes, strict=True))
    return replace(capture, lanes=lanes)


def fields_of(capture):
    codes = np.stack([lane.codes for lane in capture.lanes]).astype(float)
    return codes[0::2] + 1j * codes[1::2]


def of_fields(capture, z):
    z = z * 0.5  # room for any rotation
    return with_codes(capture, [np.round(part).astype(np.int16) for p in z for part in (p.real, p.imag)])


def same(found, counted):
    # another path to the same taps decides a few symbols on the border otherwise: of 850 errors, about ten
    return found.status == "locked" and found.errors == pytest.approx(counted.errors, abs=30)


@settings(max_examples=8, deadline=None, derandomize=True)
@given(phase=st.floats(0, 6.28), angle=st.floats(0, 1.57), between=st.floats(0, 6.28))
def test_rotations_leave_counts_alone(transmission, chain_of, link, counted, phase, angle, between):
    capture = transmission(link).capture
    c, s = np.cos(angle), np.sin(angle) * np.exp(1j * between)
    turned = np.exp(1j * phase) * np.array([[c, s], [-np.conj(s), c]]) @ fields_of(capture)
    assert same(demodulate(of_fields(capture, turned), chain_of(link)), counted)


@settings(max_examples=8, deadline=None, derandomize=True)
@given(order=st.permutations(range(4)), signs=st.lists(st.sampled_from([-1, 1]), min_size=4, max_size=4))
def test_lanes_may_be_permuted_and_inverted(transmission, chain_of, link, counted, order, signs):
    lanes = transmission(link).capture.lanes
    codes = [lanes[lane].codes * np.int16(sign) for lane, sign in zip(order, signs, strict=True)]
    found = demodulate(with_codes(transmission(link).capture, codes), chain_of(link))
    assert same(found, counted)
    # whole polarisations exchanged, or turned by half a turn, are what rotation does anyway; anything else is named
    natural = list(order) in ([0, 1, 2, 3], [2, 3, 0, 1]) and signs[0] == signs[1] and signs[2] == signs[3]
    assert (found.reason == "") == natural or list(order) in ([1, 0, 3, 2], [3, 2, 1, 0])


@pytest.mark.parametrize("dropped", [1, 7, 2503])
def test_delay_leaves_the_ratio_alone(transmission, chain_of, link, counted, dropped):
    capture = transmission(link).capture
    found = demodulate(with_codes(capture, [lane.codes[dropped:] for lane in capture.lanes]), chain_of(link))
    expected = counted.errors / counted.bits * found.bits
    assert found.errors == pytest.approx(expected, abs=30 + dropped / 2.5 * 4 * 0.01 + dropped / 50)


def test_injected_errors_are_counted_exactly(transmission, chain_of, ideal):
    injected = tuple(int(at) for at in np.random.default_rng(5).choice(np.arange(9_000, 15_000), 123, replace=False))
    link = replace(ideal, symbols=16_000, seed=22, snr_db=25.0, injected=injected)
    found = demodulate(transmission(link).capture, chain_of(link))
    assert {t.name: t.errors for t in found.tributaries} == {"XI": 123, "XQ": 0, "YI": 0, "YQ": 0}


def test_counted_symbols_trained_nothing(counted, figures_of):
    figures = figures_of(counted)
    assert figures["counted_1_from_symbol"] >= figures["trained_symbols"]
    assert figures["counted_symbols"] * 4 == counted.bits


def test_long_captures_are_trained_again_and_again(transmission, chain_of, link, figures_of):
    overrides = {"equaliser": {"training_symbols": 4000, "refresh_symbols": 7000, "refresh_training_symbols": 3000}}
    found = demodulate(transmission(link).capture, chain_of(link, overrides))
    figures = figures_of(found)
    assert (figures["counted_1_from_symbol"], figures["counted_1_to_symbol"]) == (4000.0, 7000.0)
    assert (figures["counted_2_from_symbol"], figures["counted_2_to_symbol"]) == (10_000.0, 14_000.0)
    assert found.errors / found.bits == pytest.approx(0.006, rel=0.3)  # theory at 8 dB; 190 errors


def test_same_capture_gives_same_result(transmission, chain_of, link, counted):
    again = demodulate(transmission(link).capture, chain_of(link))
    assert again.tributaries == counted.tributaries


def test_reference_may_be_labels(transmission, chain_of, link, counted):
    sent = transmission(link)
    labels = 2 * (sent.sent.real > 0) + (sent.sent.imag > 0)
    # the file begins elsewhere in the pattern than the capture does, and is longer than it
    found = demodulate(sent.capture, chain_of(link, order=11), np.roll(labels.astype(np.int64), 5000, axis=1))
    assert found.tributaries == counted.tributaries


def test_labels_may_hold_a_pattern_several_times(transmission, chain_of, ideal):
    link = replace(ideal, symbols=16_000, seed=23, snr_db=8.0, order=11, offsets=(0, 300, 900, 1500))
    sent = transmission(link)
    labels = 2 * (sent.sent.real > 0) + (sent.sent.imag > 0)  # nearly eight times over
    by_order = demodulate(sent.capture, chain_of(link))
    assert demodulate(sent.capture, chain_of(link), labels).tributaries == by_order.tributaries


def test_repeated_short_labels_count_alike(transmission, chain_of, ideal):
    link = replace(ideal, symbols=16_000, seed=23, snr_db=8.0, order=11, offsets=(0, 300, 900, 1500))
    sent = transmission(link)
    labels = (2 * (sent.sent.real > 0) + (sent.sent.imag > 0))[:, :2047].astype(np.uint8)
    by_labels = demodulate(sent.capture, chain_of(link), labels)
    by_order = demodulate(sent.capture, chain_of(link))
    assert by_labels.tributaries == by_order.tributaries
