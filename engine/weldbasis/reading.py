"""Read one row out of a column: the set as a value to show."""

from __future__ import annotations

from typing import Literal

from weldbasis.knowledge import Quantity
from weldbasis.trace import Value
from weldbasis.values import ABSENT, ASSUMED, NARROWED, PRESENT, UNKNOWN, WIDE, Column, Numbers, levels_of

_PRESENCE: dict[int, Literal["present", "absent", "maybe"]] = {1: "present", 2: "absent", 3: "maybe"}


def value_of(column: Column, quantity: Quantity, row: int) -> Value:
    """The set at `row` of a column, with the flags of what it rests on."""
    presence = _PRESENCE[int(column.presence[row])]
    flags = int(column.flags[row])
    unknown, assumed, wide, narrowed = (bool(flags & flag) for flag in (UNKNOWN, ASSUMED, WIDE, NARROWED))
    if column.presence[row] == ABSENT:
        return Value(unit=quantity.unit, presence=presence)
    assert column.presence[row] & PRESENT
    if isinstance(column, Numbers):
        low, high = float(column.low[row]), float(column.high[row])
        return Value(low, high, (), quantity.unit, presence, unknown, assumed, wide, narrowed)
    levels = levels_of(int(column.mask[row]), quantity.order)
    return Value(None, None, levels, quantity.unit, presence, unknown, assumed, wide, narrowed)
