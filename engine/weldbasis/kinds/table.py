"""Kind `table`: rows of ranges and levels; the one matching row, the most demanding of several, or interpolated."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from weldbasis.kinds.compiled import (
    BoundRead,
    Compiled,
    Explanation,
    Kind,
    compile_common,
    flags_of,
    gate,
    read_range,
    refuse,
    to_vocabulary,
)
from weldbasis.kinds.condition import Test, compile_test
from weldbasis.kinds.grid import (
    MOST_CELLS,
    Axis,
    cell_sets,
    level_axis,
    number_axis,
    overlaps,
    single_cells,
    winners,
)
from weldbasis.kinds.interpolate import Surface, compile_surface, evaluate_surface, explain_surface
from weldbasis.kinds.view import View
from weldbasis.knowledge import Knowledge, Quantity, Rule
from weldbasis.problem import Problem, Refused
from weldbasis.ranges import EVERYTHING, Range, parse_range
from weldbasis.values import Bools, Column, Ints, Truth, levels_where, mask_of, numbers_where

_BLOCK = 2_000_000  # cells × rows looked at in one go, to bound memory


@dataclass(frozen=True)
class Cells:
    """What the rows give for one quantity: ends for numbers or bits for levels; `there` where a row gives anything."""

    low: NDArray[np.float64]
    high: NDArray[np.float64]
    mask: NDArray[np.uint64]
    there: Bools


@dataclass(frozen=True)
class Table:
    """The grid, the row that wins each cell, and what the rows give."""

    axes: tuple[Axis, ...]
    won: NDArray[np.int32]
    gives: tuple[Cells, ...]
    covers: tuple[tuple[Bools, ...], ...] = field(repr=False)
    surface: Surface | None = None


def compile_table(rule: Rule, knowledge: Knowledge) -> Compiled:
    """Cut the axes, place the rows, refuse rows that contradict each other."""
    compiled = compile_common(rule, knowledge, None)
    if rule.body["read_as"] == "interpolated":
        surface = compile_surface(compiled)
        return _with_body(compiled, Table((), np.zeros(0, np.int32), (), (), surface))
    rows: Sequence[Mapping[str, Any]] = rule.body["rows"]
    tests = [_row_tests(compiled, place, row.get("when", {})) for place, row in enumerate(rows)]
    axes = tuple(_axis(read, [row[read.name].range for row in tests if read.name in row]) for read in compiled.reads)
    if np.prod([axis.segments for axis in axes], dtype=float) > MOST_CELLS:
        raise refuse(rule, f"the table has more than {MOST_CELLS} cells", "rows", do="split it into several rules")
    covers = tuple(tuple(_covers(axis, row.get(axis.name)) for axis in axes) for row in tests)
    gives = tuple(_cells(compiled, quantity, rows) for quantity in compiled.gives)
    if rule.body["read_as"] == "the-one-row":
        _refuse_overlap(compiled, axes, covers)
    won = winners(axes, covers, _ranks(compiled.gives[0], gives[0]))
    return _with_body(compiled, Table(axes, won, gives, covers))


def _with_body(compiled: Compiled, body: Table) -> Compiled:
    return Compiled(
        compiled.rule,
        compiled.applies,
        compiled.valid,
        compiled.reads,
        compiled.gives,
        body,
        compiled.body_quantities,
        compiled.gives_factor,
        compiled.gives_offset,
    )


def _row_tests(compiled: Compiled, place: int, when: Mapping[str, Any]) -> dict[str, Test]:
    by_name = {read.name: read.quantity for read in compiled.reads}
    found = {}
    for name, wanted in when.items():
        if name not in by_name:
            raise refuse(
                compiled.rule,
                f"row {place + 1} looks at {name!r}, which reads does not bind",
                "rows",
                place,
                "when",
                do=f"add {name} to reads",
            )
        try:
            found[name] = compile_test(by_name[name], wanted)
        except ValueError as fault:
            raise refuse(compiled.rule, f"row {place + 1}, {name}: {fault}", "rows", place, "when", name) from fault
        if found[name].there:
            raise refuse(
                compiled.rule,
                f"row {place + 1}, {name}: a table row needs a value",
                "rows",
                place,
                "when",
                name,
                do="move 'present' or 'absent' to applies_when",
            )
    return found


def _axis(read: BoundRead, ranges: Sequence[Range]) -> Axis:
    if read.quantity.is_number:
        return number_axis(read.name, read.quantity, ranges)
    return level_axis(read.name, read.quantity)


def _covers(axis: Axis, test: Test | None) -> Bools:
    if test is None:
        return np.ones(axis.segments, np.bool_)
    return axis.covers(test.range if axis.quantity.is_number else test.mask)


def _cells(compiled: Compiled, quantity: Quantity, rows: Sequence[Mapping[str, Any]]) -> Cells:
    low, high = np.full(len(rows), np.nan), np.full(len(rows), np.nan)
    mask, there = np.zeros(len(rows), np.uint64), np.zeros(len(rows), np.bool_)
    for place, row in enumerate(rows):
        give = row["give"]
        value = give.get(quantity.id, "absent") if isinstance(give, Mapping) else give
        if value == "absent" and "absent" not in quantity.order:
            continue
        there[place] = True
        try:
            if quantity.is_number:
                found = parse_range(value)
                low[place], high[place] = found.low, found.high
            else:
                mask[place] = mask_of(value if isinstance(value, list | tuple) else [value], quantity.order)
        except ValueError as fault:
            raise refuse(compiled.rule, f"row {place + 1} gives {value!r}: {fault}", "rows", place, "give") from fault
    if quantity is compiled.gives[0]:
        low, high = to_vocabulary(compiled, low, high)
    return Cells(low, high, mask, there)


def _ranks(quantity: Quantity, cells: Cells) -> list[float]:
    """How demanding each row is; a row that gives nothing ranks lowest."""
    sign = -1.0 if quantity.worse in ("lower", "first") else 1.0
    if quantity.is_number:
        ends = np.where(sign > 0, cells.high, cells.low)
        return [sign * float(end) if there else -np.inf for end, there in zip(ends, cells.there, strict=True)]
    bits = [int(mask) for mask in cells.mask]
    tops = [bit.bit_length() if sign > 0 else (bit & -bit).bit_length() for bit in bits]
    return [sign * top if bit else -np.inf for top, bit in zip(tops, bits, strict=True)]


def _refuse_overlap(compiled: Compiled, axes: Sequence[Axis], covers: Sequence[Sequence[Bools]]) -> None:
    rows = compiled.rule.body["rows"]
    problems: list[Problem] = []
    for first, second, cell in overlaps(axes, covers):
        one, other = (_give_words(rows[place]["give"]) for place in (first, second))
        gives = f"give {one} and {other}" if one != other else f"both give {one}"
        problems += refuse(
            compiled.rule,
            f"rows {first + 1} and {second + 1} both match where {describe_cell(axes, cell)}, and {gives}",
            "rows",
            second,
            do="part them, or read the table as most-demanding-row",
        ).problems
    if problems:
        raise Refused(problems)


def describe_cell(axes: Sequence[Axis], cell: Sequence[int]) -> str:
    """A cell in words: "thickness (20, 38], restraint high"."""
    words = []
    for axis, segment in zip(axes, cell, strict=True):
        if not axis.quantity.is_number:
            words.append(f"{axis.name} is {axis.quantity.order[segment]}")
        elif (inside := axis.segment_range(segment)) != EVERYTHING:
            words.append(f"{axis.name} is {inside}")
    return ", ".join(words) or "everything"


def _touched(compiled: Compiled, view: View, there: Truth) -> list[tuple[Ints, Ints] | Bools]:
    found = []
    for axis, read in zip(compiled.body.axes, compiled.reads, strict=True):
        column = view.column(read.quantity.id)
        low, high = read_range(compiled, read, view, there) if read.quantity.is_number else (None, None)
        found.append(axis.touched(column, low, high))
    return found


def evaluate_table(compiled: Compiled, view: View) -> Mapping[str, Column]:
    """For every quantity given, the hull of the rows whose cells the facts touch; absent on cells no row covers."""
    table: Table = compiled.body
    there = gate(compiled, view, tuple(read.quantity.id for read in compiled.reads))
    flags = flags_of(compiled, view)
    if table.surface is not None:
        return evaluate_surface(compiled, table.surface, view, there, flags)
    touched = _touched(compiled, view, there)
    flat, single = single_cells(table.axes, touched, view.rows)
    row_of = table.won.reshape(-1)[flat]
    wide = np.flatnonzero(~single & there.may)
    spread = _wide_cells(table, touched, wide)
    found: dict[str, Column] = {}
    for quantity, cells in zip(compiled.gives, table.gives, strict=True):
        found[quantity.id] = _read_cells(quantity, cells, row_of, wide, spread, there, flags)
    return found


def _wide_cells(table: Table, touched: Sequence[Any], wide: Ints) -> NDArray[np.bool_]:
    """For facts that touch several cells, which rows of the table (last: no row) they touch: facts × rows + 1."""
    count = len(table.covers) + 1
    result = np.zeros((len(wide), count), np.bool_)
    won = table.won.reshape(-1)
    block = max(1, _BLOCK // max(1, len(won)))
    for start in range(0, len(wide), block):
        rows = wide[start : start + block]
        part = [(t[0][rows], t[1][rows]) if isinstance(t, tuple) else t[rows] for t in touched]
        cells = cell_sets(table.axes, part)
        fact, cell = np.nonzero(cells)
        result[start + fact, won[cell]] = True  # -1, no row, falls on the last column
    return result


def _read_cells(
    quantity: Quantity,
    cells: Cells,
    row_of: NDArray[np.int32],
    wide: Ints,
    spread: NDArray[np.bool_],
    there: Truth,
    flags: NDArray[np.uint8],
) -> Column:
    gives = np.append(cells.there, False)
    may, surely = gives[row_of].copy(), gives[row_of].copy()
    if len(wide):
        may[wide] = (spread & gives).any(axis=1)
        surely[wide] = ~(spread & ~gives).any(axis=1)
    truth = there & Truth(may, surely)
    if not quantity.is_number:
        mask = np.append(cells.mask, np.uint64(0))[row_of]
        if len(wide):
            bits = np.where(spread[:, :-1] & cells.there, cells.mask, np.uint64(0))
            mask[wide] = np.bitwise_or.reduce(bits, axis=1)
        return levels_where(truth, mask, flags)
    low, high = np.append(cells.low, np.nan)[row_of], np.append(cells.high, np.nan)[row_of]
    if len(wide):
        inside = spread[:, :-1] & cells.there
        low[wide] = np.where(inside, cells.low, np.inf).min(axis=1, initial=np.inf)
        high[wide] = np.where(inside, cells.high, -np.inf).max(axis=1, initial=-np.inf)
    same = np.array_equal(low, high, equal_nan=True)
    return numbers_where(truth, low, low if same else high, flags)


def explain_table(compiled: Compiled, view: View, row: int) -> Explanation:
    """The rows that the facts touch, by number and in words."""
    table: Table = compiled.body
    if table.surface is not None:
        return explain_surface(table.surface)
    there = gate(compiled, view, tuple(read.quantity.id for read in compiled.reads))
    if not bool(there.may[row]):
        return Explanation()
    touched = view.once(("touched", compiled.rule.id), lambda: _touched(compiled, view, there))
    here = [(part[0][[row]], part[1][[row]]) if isinstance(part, tuple) else part[[row]] for part in touched]
    won = table.won.reshape(-1)[cell_sets(table.axes, here)[0]] if here else table.won.reshape(-1)
    rows = sorted(set(won.tolist()) - {-1})
    return Explanation("; ".join(row_words(compiled, place) for place in rows))


def row_words(compiled: Compiled, place: int) -> str:
    """A row of the table in one line: "row 3: thickness (20, 38], category B → 10"."""
    written = compiled.rule.body["rows"][place]
    when = ", ".join(f"{name} {_words(wanted)}" for name, wanted in written.get("when", {}).items())
    give = written["give"]
    return f"row {place + 1}: {when or 'all else'} → {_give_words(give)}"


def _give_words(give: Any) -> str:
    return ", ".join(f"{n} {_words(v)}" for n, v in give.items()) if isinstance(give, Mapping) else _words(give)


def _words(written: Any) -> str:
    if isinstance(written, list | tuple):
        return " or ".join(str(part) for part in written)
    return str(written)


TABLE = Kind("table", compile_table, evaluate_table, explain_table)
