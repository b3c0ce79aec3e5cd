"""The BER curve in a terminal: words and characters only, complete without colour."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from typing import Any

WIDTH, HEIGHT = 61, 17
_SIGNS = {"point": "o", "limit": "v", "bar": "|", "curve": ".", "threshold": "-"}


def draw_curve(
    points: Sequence[dict[str, Any]], threshold_ber: float | None, curve: Callable[[list[float]], list[float]] | None
) -> str:
    """Received power to the right, BER upward on a log axis; `v` marks an upper limit, `.` the fitted curve."""
    drawn = [p for p in points if p["received_power_dbm"] is not None]
    if not drawn:
        return "There is no point to draw."
    powers: list[float] = [p["received_power_dbm"] for p in drawn]
    low_dbm, high_dbm = min(powers) - 0.25, max(powers) + 0.25
    levels = [p["ber_high"] for p in drawn] + [p["ber"] or p["ber_high"] for p in drawn] + [threshold_ber or 0.0]
    top = math.log10(max(levels)) + 0.15
    bottom = math.log10(min(level for level in levels if level > 0)) - 0.25
    grid = [[" "] * WIDTH for _ in range(HEIGHT)]

    def column(power_dbm: float) -> int:
        return round((power_dbm - low_dbm) / (high_dbm - low_dbm) * (WIDTH - 1))

    def row(ber: float) -> int:
        return round((top - math.log10(ber)) / (top - bottom) * (HEIGHT - 1))

    def put(at_row: int, at_column: int, sign: str) -> None:
        if 0 <= at_row < HEIGHT and 0 <= at_column < WIDTH:
            grid[at_row][at_column] = sign

    if threshold_ber:
        for at_column in range(WIDTH):
            put(row(threshold_ber), at_column, _SIGNS["threshold"])
    if curve is not None:
        across = [low_dbm + (high_dbm - low_dbm) * i / (WIDTH - 1) for i in range(WIDTH)]
        for at_column, ber in enumerate(curve(across)):
            if ber > 0:
                put(row(ber), at_column, _SIGNS["curve"])
    for p in drawn:
        if p["upper_limit"]:
            put(row(p["ber_high"]), column(p["received_power_dbm"]), _SIGNS["limit"])
            continue
        for at_row in range(row(p["ber_high"]), row(max(p["ber_low"], 10**bottom)) + 1):
            put(at_row, column(p["received_power_dbm"]), _SIGNS["bar"])
        put(row(p["ber"]), column(p["received_power_dbm"]), _SIGNS["point"])
    return _framed(grid, top, bottom, low_dbm, high_dbm)


def _framed(grid: list[list[str]], top: float, bottom: float, low_dbm: float, high_dbm: float) -> str:
    labels = {
        round((top - e) / (top - bottom) * (HEIGHT - 1)): f"1e{e}" for e in range(math.ceil(bottom), int(top) + 1)
    }
    lines = [f"{labels.get(number, ''):>8} |{''.join(cells)}".rstrip() for number, cells in enumerate(grid)]
    axis = [" "] * (WIDTH + 6)
    for level in range(math.ceil(low_dbm), math.floor(high_dbm) + 1):
        at = round((level - low_dbm) / (high_dbm - low_dbm) * (WIDTH - 1))
        for offset, sign in enumerate(str(level)):
            axis[max(at - 1, 0) + offset] = sign
    return "\n".join([" " * 5 + "BER", *lines, f"{'':8} +{'-' * WIDTH}", f"{'':10}{''.join(axis).rstrip()}  dBm"])
