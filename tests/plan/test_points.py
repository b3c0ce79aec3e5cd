"""Points and their order."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from owlight.plan.points import order_of, points_of
from owlight.sequence import Sequence, read_sequence

ORDERS = ["as listed", "ascending", "descending", "up-down", "shuffled", "shuffled passes"]


def sequence(orders: list[str], passes: int = 1, every: int | None = None, values: int = 5) -> Sequence:
    """Sweeps of attenuation and gain, whose values are listed from high to low."""
    text = f'sequence = "s"\nformat_version = 1\nstop = {{ passes = {passes} }}\n'
    names = ["attenuator.attenuation", "receiver.gain"][: len(orders)]
    if every:
        text += f"[reference]\nevery = {every}\n" + "".join(f'"{name}" = "2 dB"\n' for name in names)
    for name, order in zip(names, orders, strict=True):
        listed = ", ".join(f'"{value} dB"' for value in range(values, 0, -1))
        text += f'[[sweep]]\nsetting = "{name}"\nvalues = [{listed}]\norder = "{order}"\n'
    document = read_sequence(text, "s.toml")
    assert document.problems == () and document.value is not None
    return document.value


def visited(one: Sequence, seed: int = 1) -> list[list[tuple[float, ...]]]:
    points = points_of(one)
    return [[tuple(float(s.value) for s in points[i].settings) for i in each] for each in order_of(one, seed)]


@pytest.mark.parametrize(
    ("order", "expected"),
    [
        ("as listed", [5, 4, 3, 2, 1]),
        ("ascending", [1, 2, 3, 4, 5]),
        ("descending", [5, 4, 3, 2, 1]),
        ("up-down", [1, 2, 3, 4, 5, 5, 4, 3, 2, 1]),
    ],
)
def test_order_is_what_it_is_called(order: str, expected: list[float]) -> None:
    assert visited(sequence([order], passes=2)) == [[(value,) for value in expected]] * 2


def test_one_shuffle_is_the_same_in_every_pass() -> None:
    first, second = visited(sequence(["shuffled"], passes=2))
    assert first == second != sorted(first)


def test_shuffled_passes_differ_and_are_whole() -> None:
    passes = visited(sequence(["shuffled passes"], passes=6))
    assert len({tuple(each) for each in passes}) > 3
    assert all(sorted(each) == [(1,), (2,), (3,), (4,), (5,)] for each in passes)


def test_shuffle_follows_the_seed_alone() -> None:
    one = sequence(["shuffled passes"], passes=3)
    assert visited(one, 1) == visited(one, 1) != visited(one, 2)


def test_nested_sweep_finishes_inner_curve_first() -> None:
    (only,) = visited(sequence(["descending", "shuffled passes"], values=3))
    assert [outer for outer, _ in only] == [3, 3, 3, 2, 2, 2, 1, 1, 1]
    assert all(sorted(inner for outer, inner in only if outer == value) == [1, 2, 3] for value in (1, 2, 3))


@settings(max_examples=40, deadline=None, derandomize=True)
@given(st.lists(st.sampled_from(ORDERS), max_size=2), st.integers(1, 3), st.integers(0, 2**40))
def test_every_pass_visits_each_point_equally(orders: list[str], passes: int, seed: int) -> None:
    one = sequence(orders, passes, values=3)
    points = points_of(one)
    stays = 2 ** orders.count("up-down")
    for indices in order_of(one, seed):
        assert sorted(indices) == sorted(list(range(len(points))) * stays)
    assert [point.index for point in points] == list(range(len(points)))
    assert len({point.settings for point in points}) == len(points) == 3 ** len(orders)


def test_reference_returns_after_every_few_stays() -> None:
    one = sequence(["ascending"], passes=3, every=4)
    points = points_of(one)
    flat = [points[index].reference for indices in order_of(one, 1) for index in indices]
    assert flat[0] and points[-1].reference
    gaps = "".join("R" if reference else "." for reference in flat)
    assert gaps == "R....R....R....R..."


def test_no_sweep_is_one_point() -> None:
    assert visited(sequence([], passes=2)) == [[()], [()]]
