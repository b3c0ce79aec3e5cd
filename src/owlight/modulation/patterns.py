"""Maximal-length patterns and offsets at which their copies cannot be mistaken for one another.

Generators: ITU-T O.150, clause 5 (orders 9, 11, 15, 20, 23, 31); orders 7 and 10 are common practice.
"""

from __future__ import annotations

import itertools

import numpy as np
import numpy.typing as npt

# b[k] = b[k - a] xor b[k - n]
_TAPS = {7: (6, 7), 9: (5, 9), 10: (7, 10), 11: (9, 11), 15: (14, 15), 20: (17, 20), 23: (18, 23), 31: (28, 31)}
ORDERS = tuple(_TAPS)
LONGEST = 23
"""Orders above it do not fit a memory as a whole period; ask for a part of it by `length`."""

_SPREAD_15 = (0, 3178, 9760, 10855)
"""Every two at least 1,095 bits apart, and so are all pairwise lag differences; images under shift-and-add (the sum of
a maximal-length pattern and its delay is the pattern again) lie at least 350 bits from each other."""


def pattern(order: int, length: int | None = None) -> npt.NDArray[np.uint8]:
    """One period (or `length` bits) of the generator's own sequence as uint8 0 and 1, starting with `order` ones.

    O.150 inverts orders 15, 23 and 31 on the line; this is the sequence before that. ValueError for another order.

    >>> "".join(str(bit) for bit in pattern(7)[:24])
    '111111100000010000011000'
    """
    if order not in _TAPS:
        raise ValueError(f"There is no pattern of order {order}; the known ones are {', '.join(map(str, ORDERS))}")
    if length is None and order > LONGEST:
        raise ValueError(f"A whole period of order {order} does not fit a memory; ask for a length")
    near, far = _TAPS[order]
    wanted = length or 2**order - 1
    bits = np.ones(max(wanted, 2 * order), dtype=np.uint8)
    known = order
    for k in range(order, 2 * order):
        bits[k] = bits[k - near] ^ bits[k - far]
    known, scale = 2 * order, 1
    # the square of the recurrence is one too, with both lags doubled: blocks grow as the known part does
    while known < wanted:
        while 2 * scale * far <= known:
            scale *= 2
        step = min(scale * near, wanted - known)
        bits[known : known + step] = (
            bits[known - scale * near : known - scale * near + step]
            ^ bits[known - scale * far : known - scale * far + step]
        )
        known += step
    return bits[:wanted]


def spread_offsets(order: int, count: int) -> tuple[int, ...]:
    """Offsets of `count` tributaries into one pattern whose lags and lag differences are far apart.

    A quarter period each would be the worst choice: a swap of lanes then differs from the plan by one symbol.

    >>> spread_offsets(15, 4)
    (0, 3178, 9760, 10855)
    """
    if order == 15 and count <= 4:
        return _SPREAD_15[:count]
    period = 2**order - 1
    rng = np.random.default_rng([order, count])  # one set for everybody, found once
    best, best_apart = tuple(range(count)), 0
    for _ in range(400):
        candidate = (0, *sorted(int(offset) for offset in rng.integers(1, period, count - 1)))
        apart = _apart(candidate, period)
        if apart > best_apart:
            best, best_apart = candidate, apart
    return best


def _apart(offsets: tuple[int, ...], period: int) -> int:
    """The least circular distance between two offsets, and between two differences of offsets."""
    lags = [(b - a) % period for a, b in itertools.permutations(offsets, 2)]
    if not lags:
        return period
    distances = [min(lag, period - lag) for lag in lags]
    ordered = np.sort(np.array(lags))
    gaps = np.diff(np.append(ordered, ordered[0] + period))
    return int(min(min(distances), gaps.min() if len(lags) > 1 else period))
