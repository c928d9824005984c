"""Sets of what a value may be, in columns over joints or members.

A number is a closed range, a level a non-empty set of levels kept as bits. Beside its set every value
says whether it may be present or absent, and three flags say what it rests on. All arrays of one
column have the same length: one entry a joint, or one a member.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

Floats: TypeAlias = NDArray[np.float64]
Bits: TypeAlias = NDArray[np.uint64]
Bytes: TypeAlias = NDArray[np.uint8]
Bools: TypeAlias = NDArray[np.bool_]
Ints: TypeAlias = NDArray[np.intp]

# Presence is a set too: the value may be present, may be absent, or either.
PRESENT, ABSENT, MAYBE = np.uint8(1), np.uint8(2), np.uint8(3)
# What a value rests on; the flags of all that is read are joined in what is given.
UNKNOWN, ASSUMED, WIDE = np.uint8(1), np.uint8(2), np.uint8(4)
# Set last of all: the set is less than its own rule makes of what it reads, because the joint was worked out in parts.
NARROWED = np.uint8(8)


@dataclass(frozen=True)
class Numbers:
    """Closed ranges: `low` and `high` are nan where the value is surely absent."""

    low: Floats
    high: Floats
    presence: Bytes
    flags: Bytes

    def __len__(self) -> int:
        return len(self.low)

    def take(self, rows: Ints | Bools) -> Numbers:
        """The column's entries at `rows`."""
        low = self.low[rows]
        high = low if self.high is self.low else self.high[rows]
        return Numbers(low, high, self.presence[rows], self.flags[rows])


@dataclass(frozen=True)
class Levels:
    """Sets of levels: bit i of `mask` stands for level i of the quantity's order; 0 where surely absent."""

    mask: Bits
    presence: Bytes
    flags: Bytes

    def __len__(self) -> int:
        return len(self.mask)

    def take(self, rows: Ints | Bools) -> Levels:
        """The column's entries at `rows`."""
        return Levels(self.mask[rows], self.presence[rows], self.flags[rows])


Column: TypeAlias = Numbers | Levels


@dataclass(frozen=True)
class Truth:
    """Three-valued truth of a condition, a row each: it may hold, and it surely holds."""

    may: Bools
    surely: Bools

    def __and__(self, other: Truth) -> Truth:
        return Truth(self.may & other.may, self.surely & other.surely)

    def __or__(self, other: Truth) -> Truth:
        return Truth(self.may | other.may, self.surely | other.surely)


def exact_numbers(values: Floats | Sequence[float], flags: int = 0) -> Numbers:
    """A column of known numbers; nan stands for absent."""
    low = np.asarray(values, dtype=np.float64)
    presence = np.where(np.isnan(low), ABSENT, PRESENT)
    return Numbers(low, low, presence, np.full(len(low), flags, np.uint8))


def number_ranges(low: Floats | Sequence[float], high: Floats | Sequence[float], flags: int = 0) -> Numbers:
    """A column of present ranges."""
    lows, highs = np.asarray(low, np.float64), np.asarray(high, np.float64)
    return Numbers(lows, highs, np.full(len(lows), PRESENT), np.full(len(lows), flags, np.uint8))


def level_sets(masks: Bits | Sequence[int], flags: int = 0) -> Levels:
    """A column of level sets; an empty mask stands for absent."""
    mask = np.asarray(masks, np.uint64)
    presence = np.where(mask == 0, ABSENT, PRESENT)
    return Levels(mask, presence, np.full(len(mask), flags, np.uint8))


def mask_of(levels: Sequence[str], order: Sequence[str]) -> int:
    """The bits of `levels` in a quantity's order; KeyError is impossible for checked knowledge."""
    return sum(1 << order.index(level) for level in set(levels))


@lru_cache(maxsize=1 << 12)
def levels_of(mask: int, order: tuple[str, ...]) -> tuple[str, ...]:
    """The levels whose bits are set, in the quantity's order."""
    return tuple(level for place, level in enumerate(order) if int(mask) >> place & 1)


def is_point(column: Numbers) -> bool:
    """Whether every range of the column is a single number, so that it is computed once."""
    return column.high is column.low


def chosen(first_where: Bools, first: Column, second: Column) -> Column:
    """Row by row, `first` where asked, else `second`; both of one sort."""
    presence = np.where(first_where, first.presence, second.presence)
    flags = np.where(first_where, first.flags, second.flags)
    if isinstance(first, Levels) and isinstance(second, Levels):
        return Levels(np.where(first_where, first.mask, second.mask), presence, flags)
    assert isinstance(first, Numbers)
    assert isinstance(second, Numbers)
    low = np.where(first_where, first.low, second.low)
    if is_point(first) and is_point(second):
        return Numbers(low, low, presence, flags)
    return Numbers(low, np.where(first_where, first.high, second.high), presence, flags)


def joined_flags(columns: Sequence[Column], rows: int) -> Bytes:
    """The flags of all columns put together, for what is computed from them."""
    flags = np.zeros(rows, np.uint8)
    for column in columns:
        flags |= column.flags
    return flags


@lru_cache(maxsize=16)
def absent_numbers(rows: int) -> Numbers:
    """A column of numbers none of which is there; shared, so it cannot be written to."""
    nothing, presence, flags = np.full(rows, np.nan), np.full(rows, ABSENT), np.zeros(rows, np.uint8)
    for array in (nothing, presence, flags):
        array.setflags(write=False)
    return Numbers(nothing, nothing, presence, flags)


@lru_cache(maxsize=16)
def absent_levels(rows: int) -> Levels:
    """A column of levels none of which is there; shared, so it cannot be written to."""
    mask, presence, flags = np.zeros(rows, np.uint64), np.full(rows, ABSENT), np.zeros(rows, np.uint8)
    for array in (mask, presence, flags):
        array.setflags(write=False)
    return Levels(mask, presence, flags)


def presence_of(there: Truth) -> Bytes:
    """Presence from the truth of "there is a value"."""
    return (np.where(there.may, PRESENT, 0) | np.where(there.surely, 0, ABSENT)).astype(np.uint8)


def is_there(column: Column) -> Truth:
    """Whether the column has a value, row by row."""
    return Truth((column.presence & PRESENT) != 0, column.presence == PRESENT)


def may_be_at(column: Column, row: int) -> bool:
    """Whether there may be a value in one row."""
    return bool(column.presence[row] & PRESENT)


def surely_at(column: Column, row: int) -> bool:
    """Whether there surely is a value in one row."""
    return bool(column.presence[row] == PRESENT)


def numbers_where(there: Truth, low: Floats, high: Floats, flags: Bytes) -> Numbers:
    """Ranges kept where there may be a value, nan and absent elsewhere."""
    if bool(there.may.all()):
        return Numbers(low, high, presence_of(there), flags)
    kept = np.where(there.may, low, np.nan)
    tops = kept if high is low else np.where(there.may, high, np.nan)
    return Numbers(kept, tops, presence_of(there), np.where(there.may, flags, 0).astype(np.uint8))


def levels_where(there: Truth, mask: Bits, flags: Bytes) -> Levels:
    """Level sets kept where there may be a value, empty and absent elsewhere."""
    kept = np.where(there.may, mask, np.uint64(0))
    return Levels(kept, presence_of(there), np.where(there.may, flags, 0).astype(np.uint8))
