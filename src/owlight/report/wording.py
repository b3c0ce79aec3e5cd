"""Numbers, times and spans as people read them."""

from __future__ import annotations

import math
from datetime import datetime

_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
NOT_ASSESSED = "not assessed"


def number(value: float | None, decimals: int) -> str:
    """With a true minus sign.

    >>> number(-38.126, 2)
    '−38.13'
    """
    return "" if value is None else f"{value:.{decimals}f}".replace("-", "−")


def signed(value: float, decimals: int) -> str:
    """
    >>> signed(0.021, 3)
    '+0.021'
    """
    return f"{value:+.{decimals}f}".replace("-", "−")


def level(power_dbm: float, decimals: int = 2) -> str:
    return f"{number(power_dbm, decimals)} dBm"


def ratio(ber: float | None, fixed: bool = False) -> str:
    """Without trailing zeros, unless `fixed` for a column.

    >>> ratio(0.0038), ratio(1e-05), ratio(None)
    ('3.8×10⁻³', '1×10⁻⁵', '')
    """
    if ber is None:
        return ""
    if ber == 0.0:
        return "0"
    mantissa, _, power = f"{ber:.2e}".partition("e")
    return f"{mantissa if fixed else mantissa.rstrip('0').rstrip('.')}×{decade(int(power))}"


def ratio_span(low: float, high: float) -> str:
    """Both ends in one power of ten, so that they can be compared at a glance.

    >>> ratio_span(2.54e-4, 3.169e-4)
    '2.54 to 3.17×10⁻⁴'
    """
    power = math.floor(math.log10(high))
    return f"{low / 10.0**power:.2f} to {high / 10.0**power:.2f}×{decade(power)}"


def decade(power: int) -> str:
    return "10" + str(power).translate(_RAISED)


def figure(value: float | None) -> str:
    """A statistic of any size in three digits."""
    if value is None:
        return ""
    if value != 0.0 and math.isfinite(value) and not 1e-3 <= abs(value) < 1e6:
        return ("−" if value < 0 else "") + ratio(abs(value))
    return f"{value:.3g}".replace("-", "−") if abs(value) < 1000 else f"{value:,.0f}".replace(",", "\u202f")


def count(value: int) -> str:
    """Thousands apart by a thin space.

    >>> count(1200000).replace("\\u202f", "_")
    '1_200_000'
    """
    return f"{value:,}".replace(",", "\u202f")


def counted(value: int, one: str, many: str = "") -> str:
    """
    >>> counted(1, "point"), counted(3, "stay"), counted(2, "finding is", "findings are")
    ('1 point', '3 stays', '2 findings are')
    """
    return f"{value} {one if value == 1 else many or one + 's'}"


def moment(utc: str) -> str:
    """
    >>> moment("2026-11-30T20:04:05.123456Z")
    '2026-11-30 20:04:05 UTC'
    """
    return f"{utc[:10]} {utc[11:19]} UTC" if utc else "not recorded"


def seconds_between(start_utc: str, end_utc: str) -> float | None:
    try:
        return (datetime.fromisoformat(end_utc) - datetime.fromisoformat(start_utc)).total_seconds()
    except ValueError:
        return None


def period(start_utc: str, end_utc: str) -> str:
    """
    >>> period("2026-11-30T20:04:05.1Z", "2026-12-01T06:00:00.0Z")
    '2026-11-30 20:04 to 2026-12-01 06:00 UTC, 9 h 56 min'
    """
    seconds = seconds_between(start_utc, end_utc)
    if seconds is None:
        return f"begun {moment(start_utc)}"
    day = "" if start_utc[:10] == end_utc[:10] else f"{end_utc[:10]} "
    return f"{start_utc[:10]} {start_utc[11:16]} to {day}{end_utc[11:16]} UTC, {span(seconds)}"


def span(seconds: float) -> str:
    """
    >>> span(42.0), span(600.0), span(30_000.0)
    ('42 s', '10 min', '8 h 20 min')
    """
    if seconds < 120:
        return f"{seconds:.0f} s"
    minutes = round(seconds / 60)
    return f"{minutes} min" if minutes < 120 else f"{minutes // 60} h {minutes % 60} min"


def begun(words: str) -> str:
    """With a capital at the start and the rest, units above all, untouched.

    >>> begun("sensitivity +0.02 dB")
    'Sensitivity +0.02 dB'
    """
    return words[:1].upper() + words[1:]
