"""Kind `gather`: from the members of a joint to the joint: highest, lowest, most demanding, sum, thickest, any."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from weldbasis.kinds.compiled import Compiled, Explanation, Kind, compile_common, gate, refuse
from weldbasis.kinds.condition import Condition, compile_condition, judge, quantities_in
from weldbasis.kinds.governing import worst_of_levels
from weldbasis.kinds.view import View
from weldbasis.knowledge import Knowledge, Quantity, Rule
from weldbasis.reading import value_of
from weldbasis.trace import Candidate, Ref, Value
from weldbasis.values import (
    Bits,
    Bools,
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

NOT_GATHERED = "not among those gathered"


@dataclass(frozen=True)
class Gather:
    """Which members' quantity to take and how; `whole` withholds the result where a member has no value."""

    of: Quantity
    take: str
    by: Quantity | None
    where: Condition
    whole: bool
    lowest: bool = False


def compile_gather(rule: Rule, knowledge: Knowledge) -> Compiled:
    """Resolve what is gathered; sums and `thickest` are for numbers, `most-demanding` follows the vocabulary."""
    body = rule.body
    of = knowledge.quantities[body["of"]]
    given = knowledge.quantities[rule.gives[0]]
    if of.of != "member" or given.of != "joint":
        raise refuse(rule, f"gathers {of.id} into {given.id}; it must go from members to the joint", "of")
    if of.order != given.order or of.unit != given.unit:
        raise refuse(rule, f"{of.id} has another unit or other levels than {given.id}", "of")
    take = str(body["take"])
    if not of.is_number and take in ("sum", "highest", "lowest"):
        raise refuse(rule, f"{of.id} is a level and cannot be taken as {take}", "take", do="take most-demanding or any")
    lowest = take == "lowest" or (take == "most-demanding" and given.worse in ("lower", "first"))
    if take == "most-demanding" and given.worse == "neither":
        raise refuse(rule, f"{given.id} does not say which end is more demanding", "take")
    try:
        where = compile_condition(body.get("where", {}), knowledge)
    except (ValueError, KeyError) as fault:
        raise refuse(rule, f"where: {fault}", "where") from fault
    by = knowledge.quantities[body["by"]] if "by" in body else None
    if take == "thickest" and by is None:
        raise refuse(rule, "take: thickest needs by: the quantity that measures thickness", "take")
    found = Gather(of, take, by, where, body.get("if_missing", "withhold") == "withhold", lowest)
    inputs = (of.id, *([by.id] if by else []), *quantities_in(where))
    return compile_common(rule, knowledge, found, tuple(dict.fromkeys(inputs)))


def evaluate_gather(compiled: Compiled, view: View) -> Mapping[str, Column]:
    """One column over joints. `view` sees joints; the members' view is made from the same columns."""
    body: Gather = compiled.body
    members = view.members
    column = members.column(body.of.id)
    wanted = _likely(body, members)
    counts = wanted & is_there(column)
    there = Truth(_any(counts.may, members), _any(counts.surely, members))
    if body.whole:
        surely_missing = _any(wanted.surely & ~counts.may, members)
        may_be_missing = _any(wanted.may & ~(is_there(column).surely), members)
        there = there & Truth(~surely_missing, ~may_be_missing)
    there = there & gate(compiled, view, ())
    flags = np.bitwise_or.reduceat(np.where(counts.may, column.flags, 0).astype(np.uint8), members.starts)
    if isinstance(column, Levels):
        mask = _join_levels(body, column, counts, members)
        return {compiled.gives[0].id: levels_where(there, mask, flags)}
    low, high = _join_numbers(body, column, counts, members)
    return {compiled.gives[0].id: numbers_where(there, low, high, flags)}


def _any(rows: Bools, members: View) -> Bools:
    return np.logical_or.reduceat(rows, members.starts)


def _may_be_thickest(body: Gather, members: View, wanted: Truth) -> Truth:
    assert body.by is not None
    by = members.column(body.by.id)
    assert isinstance(by, Numbers)
    low = np.where(wanted.surely & is_there(by).surely, by.low, -np.inf)
    best = np.maximum.reduceat(low, members.starts)[members.joint_of]
    may = is_there(by).may & (by.high >= best)
    rivals = np.add.reduceat((may & wanted.may).astype(np.intp), members.starts)[members.joint_of]
    return Truth(may, may & (rivals == 1))


def _join_numbers(body: Gather, column: Numbers, counts: Truth, members: View) -> tuple[Floats, Floats]:
    starts = members.starts
    if body.take == "sum":
        low = np.add.reduceat(
            np.where(counts.surely, column.low, np.where(counts.may, np.minimum(column.low, 0), 0)), starts
        )
        if is_point(column) and bool((counts.may == counts.surely).all()):
            return low, low
        return low, np.add.reduceat(np.where(counts.may, np.maximum(column.high, 0), 0), starts)
    if body.take in ("thickest", "any"):
        low = np.minimum.reduceat(np.where(counts.may, column.low, np.inf), starts)
        high = np.maximum.reduceat(np.where(counts.may, column.high, -np.inf), starts)
        return low, low if np.array_equal(low, high) else high
    if body.lowest:
        flipped = Numbers(-column.high, -column.low, column.presence, column.flags)
        low, high = _highest(flipped, counts, starts)
        return -high, -low
    return _highest(column, counts, starts)


def _highest(column: Numbers, counts: Truth, starts: np.ndarray) -> tuple[Floats, Floats]:
    high = np.maximum.reduceat(np.where(counts.may, column.high, -np.inf), starts)
    sure = np.maximum.reduceat(np.where(counts.surely, column.low, -np.inf), starts)
    least = np.minimum.reduceat(np.where(counts.may, column.low, np.inf), starts)
    low = np.where(np.isfinite(sure), sure, least)
    return (high, high) if np.array_equal(low, high) else (low, high)


def _join_levels(body: Gather, column: Levels, counts: Truth, members: View) -> Bits:
    if body.take in ("any", "thickest"):
        return np.bitwise_or.reduceat(np.where(counts.may, column.mask, np.uint64(0)), members.starts)
    standing = []
    sizes = np.diff(np.append(members.starts, members.rows))
    for place in range(int(sizes.max())):
        here = sizes > place
        row = np.where(here, members.starts + np.minimum(place, sizes - 1), 0)
        standing.append((column.take(row), Truth(counts.may[row] & here, counts.surely[row] & here)))
    return worst_of_levels(standing, len(body.of.order), lowest=body.lowest)


def explain_gather(compiled: Compiled, view: View, row: int) -> Explanation:
    """Every member with its value, whether it counts and whether it governs."""
    body: Gather = compiled.body
    members = view.members
    column = members.column(body.of.id)
    likely = view.once(("likely", compiled.rule.id), lambda: _likely(body, members))
    gathered = view.once(("own", compiled.rule.id), lambda: evaluate_gather(compiled, view)[compiled.gives[0].id])
    result = value_of(gathered, compiled.gives[0], row)
    first = int(members.starts[row])
    last = int(members.starts[row + 1]) if row + 1 < len(members.starts) else members.rows
    candidates = []
    for at in range(first, last):
        value = value_of(column, body.of, at)
        counts = bool(likely.may[at]) and value.presence != "absent"
        remark = "" if counts else ("gives no value" if bool(likely.may[at]) else NOT_GATHERED)
        governs, behind = _standing(body, value, result) if counts else (False, None)
        candidates.append(Candidate(Ref(body.of.id, at - first + 1), value, governs, counts, behind, remark))
    return Explanation("", tuple(candidates))


def governing_members(compiled: Compiled, view: View) -> Bools:
    """The members that govern what is gathered; the same judgement as for one joint."""
    body: Gather = compiled.body
    members = view.members
    column = members.column(body.of.id)
    result = evaluate_gather(compiled, view)[compiled.gives[0].id].take(members.joint_of)
    counts = _likely(body, members).may & is_there(column).may
    if isinstance(column, Levels) and isinstance(result, Levels):
        among: Bools = counts & ((column.mask & result.mask) != 0)
        return among
    assert isinstance(column, Numbers)
    assert isinstance(result, Numbers)
    if body.take in ("sum", "thickest", "any"):
        return counts
    same = column.low == result.low if body.lowest else column.high == result.high
    governs: Bools = counts & (same | ~is_there(result).may)
    return governs


def _likely(body: Gather, members: View) -> Truth:
    wanted = judge(body.where, members) if body.where else Truth(members.all_true, members.all_true)
    return wanted & _may_be_thickest(body, members, wanted) if body.take == "thickest" else wanted


def _standing(body: Gather, value: Value, result: Value) -> tuple[bool, float | None]:
    """Whether a member that counts governs, and how far it stands behind."""
    if value.low is None or value.high is None:
        return bool(set(value.any_of) & set(result.any_of)), None
    if body.take in ("sum", "thickest", "any") or result.low is None or result.high is None:
        return True, None
    mine, best = (value.low, result.low) if body.lowest else (value.high, result.high)
    return mine == best, abs(best - mine)


GATHER = Kind("gather", compile_gather, evaluate_gather, explain_gather)
