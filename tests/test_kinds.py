"""Kinds on sets against brute force: governing, gather and table give exactly what enumeration gives."""

from __future__ import annotations

import itertools

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from weldbasis.kinds.governing import Governing, govern_levels, govern_numbers, worst_of_levels
from weldbasis.kinds.grid import cell_sets, level_axis, number_axis, overlaps, winners
from weldbasis.knowledge import Level, Quantity
from weldbasis.ranges import Range
from weldbasis.values import ABSENT, MAYBE, PRESENT, Levels, Numbers, Truth

YES = Truth(np.ones(1, np.bool_), np.ones(1, np.bool_))


def number_set(low: float, high: float, presence: int) -> tuple[Numbers, Truth]:
    gone = presence == ABSENT
    column = Numbers(
        np.array([np.nan if gone else low]),
        np.array([np.nan if gone else high]),
        np.array([presence], np.uint8),
        np.zeros(1, np.uint8),
    )
    return column, Truth(np.array([presence != ABSENT]), np.array([presence == PRESENT]))


number_sets = st.builds(
    lambda low, width, presence: (low, low + width, presence),
    st.integers(-5, 5),
    st.integers(0, 4),
    st.sampled_from([int(PRESENT), int(ABSENT), int(MAYBE)]),
)


def choices(candidate: tuple[int, int, int]) -> list[int | None]:
    low, high, presence = candidate
    values: list[int | None] = list(range(low, high + 1)) if presence != ABSENT else []
    return values + ([None] if presence != PRESENT else [])


@given(st.lists(number_sets, min_size=1, max_size=3), st.sampled_from(["highest", "lowest", "first"]))
def test_governing_numbers_equal_enumeration(candidates: list[tuple[int, int, int]], take: str) -> None:
    results: set[int | None] = set()
    for combination in itertools.product(*[choices(candidate) for candidate in candidates]):
        there = [value for value in combination if value is not None]
        ends = {"highest": max(there), "lowest": min(there), "first": there[0]} if there else {}
        results.add(ends.get(take))
    found = govern_numbers(take, [number_set(*candidate) for candidate in candidates], YES)
    numbers = sorted(value for value in results if value is not None)
    assert bool(found.presence[0] & PRESENT) == bool(numbers)
    assert bool(found.presence[0] & ABSENT) == (None in results)
    if numbers:
        assert (found.low[0], found.high[0]) == (numbers[0], numbers[-1])


level_sets = st.tuples(st.integers(1, 15), st.sampled_from([int(PRESENT), int(MAYBE), int(ABSENT)]))


@given(st.lists(level_sets, min_size=1, max_size=3), st.booleans())
def test_worst_of_levels_equals_enumeration(candidates: list[tuple[int, int]], lowest: bool) -> None:
    options = [
        [bit for bit in range(4) if mask >> bit & 1 and presence != ABSENT] + ([None] if presence != PRESENT else [])
        for mask, presence in candidates
    ]
    results = set()
    for combination in itertools.product(*options):
        there = [value for value in combination if value is not None]
        if there:
            results.add(min(there) if lowest else max(there))
    standing = [
        (
            Levels(
                np.array([0 if presence == ABSENT else mask], np.uint64),
                np.array([presence], np.uint8),
                np.zeros(1, np.uint8),
            ),
            Truth(np.array([presence != ABSENT]), np.array([presence == PRESENT])),
        )
        for mask, presence in candidates
    ]
    found = int(worst_of_levels(standing, 4, lowest)[0])
    assert {bit for bit in range(4) if found >> bit & 1} == results


def test_first_of_levels_stops_at_the_first_that_is_sure() -> None:
    sure = (Levels(np.array([1], np.uint64), np.array([PRESENT]), np.zeros(1, np.uint8)), YES)
    later = (Levels(np.array([2], np.uint64), np.array([PRESENT]), np.zeros(1, np.uint8)), YES)
    assert int(govern_levels(Governing("first", (), ()), [sure, later], YES, 2).mask[0]) == 1


THICKNESS = Quantity("t", "t", "joint", "", range=Range(0, 100))
GRADE = Quantity("g", "g", "joint", "", levels=(Level("a", "a"), Level("b", "b")))
bounds = st.builds(
    lambda low, width, a, b: Range(low, low + width, a and width > 0, b and width > 0),
    st.integers(0, 6),
    st.integers(0, 4),
    st.booleans(),
    st.booleans(),
)


@given(
    st.lists(st.tuples(bounds, st.integers(1, 3)), min_size=1, max_size=5),
    st.integers(0, 6),
    st.integers(0, 4),
    st.integers(1, 3),
)
def test_table_cells_equal_enumeration(rows: list[tuple[Range, int]], low: int, width: int, mask: int) -> None:
    """The rows a box touches, and whether it touches no row somewhere, as a fine enumeration finds them."""
    axes = (number_axis("t", THICKNESS, [row for row, _ in rows]), level_axis("g", GRADE))
    covers = [(axes[0].covers(row), axes[1].covers(levels)) for row, levels in rows]
    won = winners(axes, covers, [float(place) for place in range(len(rows))])
    column = Numbers(np.array([float(low)]), np.array([float(low + width)]), np.array([PRESENT]), np.zeros(1, np.uint8))
    levels = Levels(np.array([mask], np.uint64), np.array([PRESENT]), np.zeros(1, np.uint8))
    touched = [axes[0].touched(column, column.low, column.high), axes[1].touched(levels, None, None)]
    found = set(won.reshape(-1)[cell_sets(axes, touched)[0]].tolist())
    expected = set()
    for point in np.arange(low, low + width + 0.01, 0.25):
        for bit in (0, 1):
            if mask >> bit & 1:
                matching = [
                    place
                    for place, (row, levels_of_row) in enumerate(rows)
                    if row.holds(point) and levels_of_row >> bit & 1
                ]
                expected.add(max(matching) if matching else -1)
    assert found == expected


@given(st.lists(st.tuples(bounds, st.integers(1, 3)), min_size=2, max_size=4))
def test_overlaps_equal_enumeration(rows: list[tuple[Range, int]]) -> None:
    axes = (number_axis("t", THICKNESS, [row for row, _ in rows]), level_axis("g", GRADE))
    covers = [(axes[0].covers(row), axes[1].covers(levels)) for row, levels in rows]
    found = {(first, second) for first, second, _ in overlaps(axes, covers)}
    expected = set()
    for first, second in itertools.combinations(range(len(rows)), 2):
        for point in np.arange(-1, 12, 0.25):
            if rows[first][0].holds(point) and rows[second][0].holds(point) and rows[first][1] & rows[second][1]:
                expected.add((first, second))
    assert found == expected
