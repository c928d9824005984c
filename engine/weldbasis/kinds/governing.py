"""Kind `governing`: the most demanding, the highest, the lowest or the first available of several candidates."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from weldbasis.kinds.compiled import Compiled, Explanation, Kind, compile_common, gate, refuse
from weldbasis.kinds.condition import Condition, compile_condition, judge, quantities_in
from weldbasis.kinds.view import View
from weldbasis.knowledge import Knowledge, Quantity, Rule
from weldbasis.reading import value_of
from weldbasis.trace import Candidate, Ref, Value
from weldbasis.values import (
    Bits,
    Bools,
    Bytes,
    Column,
    Floats,
    Levels,
    Numbers,
    Truth,
    is_point,
    is_there,
    levels_where,
    numbers_where,
)


@dataclass(frozen=True)
class Choice:
    """One candidate, with the condition under which it stands for choice."""

    quantity: Quantity
    when: Condition


@dataclass(frozen=True)
class Governing:
    """What to take ("highest", "lowest" or "first"), from what; `reverse` where the first level is the worst."""

    take: str
    choices: tuple[Choice, ...]
    compare: tuple[Quantity, ...]
    reverse: bool = False


def compile_governing(rule: Rule, knowledge: Knowledge) -> Compiled:
    """Resolve the candidates; all must be of the same sort as what the rule gives."""
    written = rule.body["candidates"]
    choices = []
    for place, entry in enumerate(written):
        name = entry if isinstance(entry, str) else entry["quantity"]
        try:
            when = compile_condition({} if isinstance(entry, str) else entry.get("when", {}), knowledge)
        except (ValueError, KeyError) as fault:
            raise refuse(rule, f"candidate {name}: {fault}", "candidates", place) from fault
        choices.append(Choice(knowledge.quantities[name], when))
    given = knowledge.quantities[rule.gives[0]]
    for place, choice in enumerate(choices):
        if choice.quantity.order != given.order or choice.quantity.unit != given.unit:
            raise refuse(
                rule,
                f"candidate {choice.quantity.id} has another unit or other levels than {given.id}",
                "candidates",
                place,
                do="give both the same unit, or the same order of levels",
            )
    compare = tuple(knowledge.quantities[name] for name in rule.body.get("compare", ()))
    take, reverse = _direction(rule, given)
    inputs = [choice.quantity.id for choice in choices]
    inputs += [name for choice in choices for name in quantities_in(choice.when)]
    body = Governing(take, tuple(choices), compare, reverse)
    return compile_common(rule, knowledge, body, tuple(dict.fromkeys(inputs)))


def _direction(rule: Rule, given: Quantity) -> tuple[str, bool]:
    take = str(rule.body["take"])
    if take != "most-demanding":
        return take, False
    if given.worse == "neither":
        raise refuse(
            rule,
            f"{given.id} does not say which end is more demanding",
            "take",
            do=f"write worse: in the vocabulary entry of {given.id}, or take highest, lowest or first",
        )
    if given.is_number:
        return ("highest" if given.worse == "higher" else "lowest"), False
    return "highest", given.worse == "first"


def _standing(compiled: Compiled, view: View) -> list[tuple[Column, Truth]]:
    found = []
    for choice in compiled.body.choices:
        column = view.column(choice.quantity.id)
        there = is_there(column)
        found.append((column, there & judge(choice.when, view) if choice.when else there))
    return found


def evaluate_governing(compiled: Compiled, view: View) -> Mapping[str, Column]:
    """The hull of what may govern; absent only where every candidate may be absent together."""
    standing = _standing(compiled, view)
    allowed = gate(compiled, view, ())
    if compiled.gives[0].is_number:
        numbers = [(column, there) for column, there in standing if isinstance(column, Numbers)]
        return {compiled.gives[0].id: govern_numbers(compiled.body.take, numbers, allowed)}
    levels = [(column, there) for column, there in standing if isinstance(column, Levels)]
    count = len(compiled.gives[0].order)
    return {compiled.gives[0].id: govern_levels(compiled.body, levels, allowed, count)}


def govern_numbers(take: str, standing: Sequence[tuple[Numbers, Truth]], allowed: Truth) -> Numbers:
    """Highest, lowest or first of number columns, each with the truth of its standing for choice.

    For the highest: the top is the highest top of all that may stand; the bottom is the highest bottom of
    those that surely stand, or, where none surely does, the lowest bottom of all. The rest follows alike.
    """
    if take == "first":
        return _first_number(standing, allowed)
    sign = 1.0 if take == "highest" else -1.0
    point = all(is_point(column) and bool((there.may == there.surely).all()) for column, there in standing)
    lows = [sign * (column.low if sign > 0 else column.high) for column, _ in standing]
    highs = [sign * (column.high if sign > 0 else column.low) for column, _ in standing]
    top = _fold(np.maximum, highs, [there.may for _, there in standing], -np.inf)
    sure = _fold(np.maximum, lows, [there.surely for _, there in standing], -np.inf)
    if point:
        bottom = top
    else:
        least = _fold(np.minimum, lows, [there.may for _, there in standing], np.inf)
        bottom = np.where(np.isfinite(sure), sure, least)
    low, high = (bottom, top) if sign > 0 else (-top, -bottom)
    if point:
        high = low
    there = _any_standing([truth for _, truth in standing], allowed)
    flags = np.zeros(len(low), np.uint8)
    for (column, truth), reach in zip(standing, highs, strict=True):
        flags |= np.where(truth.may & (reach >= bottom), column.flags, 0).astype(np.uint8)
    return numbers_where(there, low, high, flags)


def _fold(join: np.ufunc, values: Sequence[Floats], where: Sequence[np.ndarray], nothing: float) -> Floats:
    result = np.full(len(values[0]), nothing)
    for value, here in zip(values, where, strict=True):
        join(result, value, out=result, where=here)
    return result


def _any_standing(truths: Sequence[Truth], allowed: Truth) -> Truth:
    some = truths[0]
    for truth in truths[1:]:
        some = some | truth
    return some & allowed


def _first_number(standing: Sequence[tuple[Numbers, Truth]], allowed: Truth) -> Numbers:
    rows = len(standing[0][0])
    low, high = np.full(rows, np.inf), np.full(rows, -np.inf)
    flags, open_still = np.zeros(rows, np.uint8), np.ones(rows, np.bool_)
    for column, there in standing:
        taken = open_still & there.may
        np.minimum(low, column.low, out=low, where=taken)
        np.maximum(high, column.high, out=high, where=taken)
        flags |= np.where(taken, column.flags, 0).astype(np.uint8)
        open_still = open_still & ~there.surely
    there = _any_standing([truth for _, truth in standing], allowed)
    if bool((low == high)[there.may].all()):
        high = low
    return numbers_where(there, low, high, flags)


def govern_levels(body: Governing, standing: Sequence[tuple[Levels, Truth]], allowed: Truth, count: int) -> Levels:
    """The worst (by order) or the first of level columns, exact on sets."""
    rows = len(standing[0][0])
    flags: Bytes = np.zeros(rows, np.uint8)
    for column, there in standing:
        flags |= np.where(there.may, column.flags, 0).astype(np.uint8)
    there = _any_standing([truth for _, truth in standing], allowed)
    if body.take == "first":
        return levels_where(there, _first_level(standing), flags)
    mask = worst_of_levels(standing, count, lowest=(body.take == "lowest") != body.reverse)
    return levels_where(there, mask, flags)


def _first_level(standing: Sequence[tuple[Levels, Truth]]) -> Bits:
    mask = np.zeros(len(standing[0][0]), np.uint64)
    open_still = np.ones(len(mask), np.bool_)
    for column, there in standing:
        mask |= np.where(open_still & there.may, column.mask, np.uint64(0))
        open_still = open_still & ~there.surely
    return mask


def worst_of_levels(standing: Sequence[tuple[Levels, Truth]], count: int, lowest: bool) -> Bits:
    """Levels that the highest (or lowest) of all standing candidates may be.

    Level r may be the highest when some candidate may be r while every other may be at most r or absent.
    """
    rows = len(standing[0][0])
    result = np.zeros(rows, np.uint64)
    everything = np.uint64((1 << count) - 1) if count < 64 else np.uint64(2**64 - 1)
    for rank in range(count):
        bit = np.uint64(1 << rank)
        below = np.uint64((1 << (rank + 1)) - 1) if rank < 63 else np.uint64(2**64 - 1)
        beside = (everything & ~below) | bit if lowest else below
        may_be, never_worse = np.zeros(rows, np.bool_), np.ones(rows, np.bool_)
        for column, there in standing:
            may_be |= there.may & ((column.mask & bit) != 0)
            never_worse &= ~there.surely | ((column.mask & beside) != 0)
        result |= np.where(may_be & never_worse, bit, np.uint64(0))
    return result


def explain_governing(compiled: Compiled, view: View, row: int) -> Explanation:
    """Every candidate with its value, whether it governs and by how much the others stand behind."""
    body: Governing = compiled.body
    own = view.once(("own", compiled.rule.id), lambda: evaluate_governing(compiled, view)[compiled.gives[0].id])
    result = value_of(own, compiled.gives[0], row)
    standing = view.once(("standing", compiled.rule.id), lambda: _standing(compiled, view))
    member = view.member_number(row)
    candidates, settled = [], False
    for choice, (_, there) in zip(body.choices, standing, strict=True):
        value = value_of(view.column(choice.quantity.id), choice.quantity, row)
        may = bool(there.may[row])
        governs = may and not settled and _governs(body, value, result, compiled.gives[0])
        if body.take == "first":
            settled = settled or bool(there.surely[row])
        remark = "" if may else ("gives no value here" if value.presence == "absent" else "does not stand for choice")
        candidates.append(
            Candidate(
                Ref(choice.quantity.id, member),
                value,
                governs,
                may,
                _behind(body, value, result) if may else None,
                remark,
            )
        )
    for quantity in body.compare:
        value = value_of(view.column(quantity.id), quantity, row)
        candidates.append(
            Candidate(
                Ref(quantity.id, member), value, False, False, _behind(body, value, result), "shown for comparison"
            )
        )
    return Explanation("", tuple(candidates))


def governing_choices(compiled: Compiled, view: View) -> Iterator[tuple[str, Bools]]:
    """Every candidate with the rows in which it governs; the same judgement as for one row."""
    body: Governing = compiled.body
    given = compiled.gives[0]
    result = evaluate_governing(compiled, view)[given.id]
    open_still = is_there(result).may
    for choice, (column, there) in zip(body.choices, _standing(compiled, view), strict=True):
        governs = open_still & there.may
        if body.take == "first":
            open_still = open_still & ~there.surely
        elif isinstance(column, Numbers) and isinstance(result, Numbers):
            same = column.high == result.high if body.take == "highest" else column.low == result.low
            governs = governs & same
        elif isinstance(column, Levels) and isinstance(result, Levels):
            worst = _worst_bit(result.mask, (body.take == "lowest") != body.reverse, len(given.order))
            governs = governs & ((column.mask & worst) != 0)
        yield choice.quantity.id, governs


def _worst_bit(mask: Bits, lowest: bool, count: int) -> Bits:
    found = np.zeros(len(mask), np.uint64)
    for place in range(count - 1, -1, -1) if lowest else range(count):
        bit = np.uint64(1 << place)
        found = np.where(mask & bit, bit, found)
    return found


def _governs(body: Governing, value: Value, result: Value, given: Quantity) -> bool:
    if result.presence == "absent":
        return False
    if not given.is_number:
        demanding = worst_level(result.any_of, given, body)
        return body.take == "first" or demanding in value.any_of
    if body.take == "first":
        return True
    if body.take == "highest":
        return value.high == result.high
    return value.low == result.low


def worst_level(levels: Sequence[str], given: Quantity, body: Governing) -> str:
    """The level of a set that the rule would take."""
    ranked = sorted(levels, key=given.order.index)
    return ranked[0] if (body.take == "lowest") != body.reverse else ranked[-1]


def _behind(body: Governing, value: Value, result: Value) -> float | None:
    if value.high is None or result.high is None or value.low is None or result.low is None:
        return None
    return value.low - result.low if body.take == "lowest" else result.high - value.high


GOVERNING = Kind("governing", compile_governing, evaluate_governing, explain_governing)
