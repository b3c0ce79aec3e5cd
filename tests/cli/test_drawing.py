"""The curve drawn with characters."""

from __future__ import annotations

from typing import Any

from owlight.cli.drawing import draw_curve


def point(power_dbm: float, ber: float | None, high: float) -> dict[str, Any]:
    return {
        "received_power_dbm": power_dbm,
        "ber": ber,
        "ber_low": (ber or 0.0) * 0.9,
        "ber_high": high,
        "upper_limit": ber is None,
    }


def test_every_point_is_drawn() -> None:
    picture = draw_curve([point(-40.0, 1e-2, 1.1e-2), point(-38.0, 1e-3, 1.1e-3)], 3.8e-3, None)
    assert picture.count("o") == 2
    assert "-40" in picture and "-38" in picture and "1e-2" in picture


def test_zero_errors_draw_a_limit() -> None:
    picture = draw_curve([point(-40.0, 1e-2, 1.1e-2), point(-36.0, None, 3e-6)], 3.8e-3, None)
    assert picture.count("o") == 1 and picture.count("v") == 1


def test_nothing_measured_is_said() -> None:
    assert draw_curve([], 3.8e-3, None) == "There is no point to draw."


def test_higher_ber_stands_higher() -> None:
    lines = draw_curve([point(-40.0, 1e-2, 1.1e-2), point(-38.0, 1e-3, 1.1e-3)], None, None).splitlines()
    rows = [(number, line.index("o")) for number, line in enumerate(lines) if "o" in line[10:]]
    assert rows[0][1] < rows[1][1]
