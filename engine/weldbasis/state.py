"""When a decision is settled, open or uncovered, and which end of a set is the demanding one."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from weldbasis.knowledge import Quantity
from weldbasis.trace import DecisionState, Value
from weldbasis.values import ABSENT, PRESENT, Bools, Column, Floats, Numbers

# Above every temperature, time and level: a decision that may not be covered, and one that is not, ask most.
MAY_BE_UNCOVERED, UNCOVERED = 1e12, np.inf
# Of a quantity without a worse end, the end that `demanding_end` takes.
_LEAST = {True: "lower", False: "first"}


def state_of(value: Value, quantity: Quantity) -> DecisionState:
    """Settled when every value left asks the shop for the same thing; uncovered when no rule gives any."""
    if value.presence == "absent":
        return "uncovered"
    if value.presence == "maybe":
        return "open"
    if value.low is None or value.high is None:
        return "settled" if len(value.any_of) == 1 else "open"
    same = round(value.low, quantity.decimals) == round(value.high, quantity.decimals)
    return "settled" if same else "open"


def open_rows(column: Column, quantity: Quantity) -> Bools:
    """Where a decision is open, for all joints at once; the same judgement as `state_of`."""
    there = column.presence != ABSENT
    if isinstance(column, Numbers):
        with np.errstate(invalid="ignore"):
            wide = np.round(column.low, quantity.decimals) != np.round(column.high, quantity.decimals)
    else:
        wide = (column.mask & (column.mask - np.uint64(1))) != 0
    still_open: Bools = there & (wide | (column.presence != PRESENT))
    return still_open


def demanding_end(value: Value, quantity: Quantity) -> float | str | None:
    """The end of a set that asks most of the shop; of a quantity without a worse end, its lower or first."""
    if value.presence == "absent":
        return None
    if value.low is None or value.high is None:
        if not value.any_of:
            return None
        return value.any_of[-1] if quantity.worse == "last" else value.any_of[0]
    return value.high if quantity.worse == "higher" else value.low


def demand(column: Column, quantity: Quantity) -> Floats | None:
    """How much the demanding end of every row asks for, in rising order; −∞ where nothing is asked.

    None where the vocabulary states no demanding end.
    """
    if quantity.worse == "neither":
        return None
    if isinstance(column, Numbers):
        worth = column.high if quantity.worse == "higher" else -column.low
    else:
        bits = (column.mask[:, None] >> np.arange(len(quantity.order), dtype=np.uint64)) & np.uint64(1)
        last = len(quantity.order) - 1 - np.argmax(bits[:, ::-1], axis=1)
        worth = (last if quantity.worse == "last" else -np.argmax(bits, axis=1)).astype(np.float64)
    return np.where(column.presence == ABSENT, -np.inf, worth)


def demand_of(column: Column, quantity: Quantity) -> Floats:
    """How much each row asks of the shop at its demanding end, as a number that rises with it.

    A number counts to the quantity's decimals. A decision that may be uncovered asks more than any that is
    covered, and one that surely is uncovered most.
    """
    stated = quantity if quantity.worse != "neither" else replace(quantity, worse=_LEAST[quantity.is_number])
    worth = demand(column, stated)
    assert worth is not None
    asked = np.round(np.nan_to_num(worth), quantity.decimals)
    asked = np.where(column.presence == PRESENT, asked, MAY_BE_UNCOVERED + asked)
    return np.where(column.presence == ABSENT, UNCOVERED, asked)
