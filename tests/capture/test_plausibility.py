"""A record is looked at before anything is counted in it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from owlight.capture import check_capture
from owlight.vocabulary.captures import Capture, CaptureId, Lane
from owlight.vocabulary.values import Stamp


@pytest.fixture
def good():
    rng = np.random.default_rng(1)
    lanes = tuple(
        Lane(name, np.round(rng.standard_normal(1000) * 20).astype(np.int8), 1e-3, 0.0, 0.0, f"hash of {name}")
        for name in ("XI", "XQ", "YI", "YQ")
    )
    return Capture(CaptureId(3, 1, 2), Stamp("", 0.0, 0), 80e9, lanes, 7)


def changed(capture, **fields):
    first, *rest = capture.lanes
    return replace(capture, lanes=(replace(first, **fields), *rest))


def findings(capture, seen=(), expected=1000):
    return {check.name: check.finding for check in check_capture(capture, seen, expected)}


def test_good_record_passes_every_question(good):
    assert set(findings(good).values()) == {"ok"}
    assert {check.subject for check in check_capture(good, (), 1000)} == {"capture 3/1/2"}


@pytest.mark.parametrize(
    ("fields", "name"),
    [
        ({"codes": np.zeros(1000, np.int8)}, "dead lane"),
        ({"codes": np.full(1000, 127, np.int8)}, "dead lane"),
        ({"clipped_fraction": 0.02}, "clipping"),
        ({"codes": np.arange(999, dtype=np.int16)}, "record length"),
        ({"codes": np.zeros(0, np.int8)}, "record length"),
        ({"sha256": "hash of YQ"}, "duplicate capture"),
    ],
)
def test_one_bad_lane_is_enough(good, fields, name):
    assert findings(changed(good, **fields))[name] == "bad"


def test_record_seen_before_is_bad(good):
    assert findings(good, seen={"hash of YI"})["duplicate capture"] == "bad"


@pytest.mark.parametrize(("expected", "finding"), [(1, "ok"), (1000, "ok"), (1001, "bad")])
def test_record_is_at_least_as_long_as_asked(good, expected, finding):
    assert findings(good, expected=expected)["record length"] == finding
