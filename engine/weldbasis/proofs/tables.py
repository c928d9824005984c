"""Proofs about tables, exact by cells: gaps, overlaps, rows that never decide, figures outside the vocabulary."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from itertools import combinations, islice, product
from math import prod

import numpy as np

from weldbasis.kinds.compiled import Compiled
from weldbasis.kinds.interpolate import Curve, Surface
from weldbasis.kinds.table import Table
from weldbasis.knowledge import Quantity
from weldbasis.proofs.cells import Cells, block_words, blocks, inside, number_in, point_in
from weldbasis.proofs.domain import Box, body_range
from weldbasis.proofs.finding import VetFinding, point_text
from weldbasis.ranges import Range, common, parse_range, within
from weldbasis.values import Bools, levels_of
from weldbasis.words import counted

_SHOWN = 3


def table_findings(compiled: Compiled, boxes: tuple[Box, ...]) -> Iterator[VetFinding]:
    """Everything proved about one table over the domain of its rule."""
    if not isinstance(compiled.body, Table) or not boxes:
        return
    yield from outside_vocabulary(compiled)
    if compiled.body.surface is not None:
        yield from curve_findings(compiled, compiled.body.surface, boxes)
    elif compiled.body.axes:
        domain = inside(compiled.body.axes, compiled.reads, boxes)
        yield from gaps(compiled, domain, boxes)
        yield from idle_rows(compiled, domain)
        yield from lost_demands(compiled, domain, boxes)


def gaps(compiled: Compiled, domain: Cells, boxes: tuple[Box, ...]) -> Iterator[VetFinding]:
    """Cells of the domain that no row covers, told as blocks."""
    table: Table = compiled.body
    bare = (table.won == -1) & domain
    found = list(islice(blocks(bare), _SHOWN))
    if not found:
        return
    words = [block_words(table.axes, compiled.reads, boxes, block) for block in found]
    left = int(bare.sum()) - sum(prod(last - first + 1 for first, last in block) for block in found)
    more = f" and {counted(left, 'cell')} more" if left else ""
    yield VetFinding(
        compiled.rule.place_of("rows"),
        "caution",
        "gaps",
        f"rule {compiled.rule.id}: no row covers {'; '.join(words)}{more}",
        "add a row (give: absent where the table is silent on purpose), or narrow valid_within",
        point_text(point_in(table.axes, compiled.reads, boxes, found[0])),
    )


def idle_rows(compiled: Compiled, domain: Cells) -> Iterator[VetFinding]:
    """Rows that decide nothing inside the domain, and why."""
    table: Table = compiled.body
    deciding = set(table.won[domain].tolist())
    for row, covers in enumerate(table.covers):
        if row in deciding:
            continue
        own = np.zeros_like(domain)
        own[np.ix_(*covers)] = True
        others = sorted(set(table.won[own & domain].tolist()) - {row, -1})
        why = _why_idle(covers, others)
        yield VetFinding(
            compiled.rule.place_of("rows", row),
            "caution",
            "gaps",
            f"rule {compiled.rule.id}: row {row + 1} never decides anything: {why}",
            "take the row out, or widen what it is for",
        )


def _why_idle(covers: tuple[Bools, ...], others: list[int]) -> str:
    """Why a row decides nothing: the rows that win wherever it holds, if any, or that it holds nowhere."""
    if others:
        rows = ", ".join(str(other + 1) for other in others)
        return f"rows {rows} stand before it" if len(others) > 1 else f"row {rows} stands before it"
    if not all(part.any() for part in covers):
        return "it holds for nothing"
    return "it lies outside the vocabulary, applies_when or valid_within"


def lost_demands(compiled: Compiled, domain: Cells, boxes: tuple[Box, ...]) -> Iterator[VetFinding]:
    """Rows that hold together where the one that wins asks for less in something the table gives, or where the
    vocabulary does not say which is the more demanding.
    """
    table: Table = compiled.body
    if compiled.rule.body["read_as"] != "most-demanding-row":
        return
    for first, second in combinations(range(len(table.covers)), 2):
        shares = [a & b for a, b in zip(table.covers[first], table.covers[second], strict=True)]
        if not all(share.any() for share in shares):
            continue
        both = np.zeros_like(domain)
        both[np.ix_(*shares)] = True
        for winner, other in ((first, second), (second, first)):
            lost = next((q for at, q in enumerate(compiled.gives) if _asks_more(table, at, q, other, winner)), None)
            shared = both & domain & (table.won == winner)
            if lost is None or not shared.any():
                continue
            block = next(blocks(shared))
            yield VetFinding(
                compiled.rule.place_of("rows", max(first, second)),
                "stop",
                "overlaps",
                f"rule {compiled.rule.id}: rows {first + 1} and {second + 1} both hold, row {winner + 1} is taken, "
                f"and row {other + 1} "
                + (f"asks for more {lost.id}" if lost.worse != "neither" else f"gives another {lost.id}"),
                "part the rows, or give each quantity by a rule of its own"
                if lost.worse != "neither"
                else f"part the rows, or say in the vocabulary which end of {lost.id} is worse",
                point_text(point_in(table.axes, compiled.reads, boxes, block)),
            )
            break


def _asks_more(table: Table, at: int, quantity: Quantity, other: int, winner: int) -> bool:
    """Whether `other` asks for more of a quantity than the row that wins, or for another value where none is worse."""
    cells = table.gives[at]
    if not cells.there[other]:
        return False
    if not cells.there[winner]:
        return True
    if quantity.is_number:
        mine, its = (cells.low[winner], cells.high[winner]), (cells.low[other], cells.high[other])
        ways = {"higher": its[1] > mine[1], "lower": its[0] < mine[0], "neither": its != mine}
        return bool(ways[quantity.worse])
    mask, another = int(cells.mask[winner]), int(cells.mask[other])
    if quantity.worse == "last":
        return another.bit_length() > mask.bit_length()
    if quantity.worse == "first":
        return (another & -another) < (mask & -mask)
    return another != mask


def outside_vocabulary(compiled: Compiled) -> Iterator[VetFinding]:
    """Figures of rows that the vocabulary does not allow: mostly a slip of unit or decimal point."""
    table: Table = compiled.body
    rule = compiled.rule
    for quantity, cells in zip(compiled.gives, table.gives, strict=False):
        if not quantity.is_number:
            continue
        for row in np.flatnonzero(cells.there).tolist():
            given = Range(float(cells.low[row]), float(cells.high[row]))
            if not within(given, quantity.range):
                written = rule.body["rows"][row]["give"]
                path = ("give", quantity.id) if isinstance(written, Mapping) else ("give",)
                yield _beyond(compiled, row, path, quantity, given, quantity.range)
    for read in compiled.reads:
        if not read.quantity.is_number:
            continue
        allowed = body_range(Box(), read)
        for row, written in enumerate(rule.body["rows"]):
            wanted = parse_range(written["when"][read.name]) if read.name in written.get("when", {}) else None
            if wanted is not None and common(wanted, allowed) is None:
                yield _beyond(compiled, row, ("when", read.name), read.quantity, wanted, allowed)


def _beyond(
    compiled: Compiled, row: int, path: tuple[str, ...], quantity: Quantity, have: Range, allowed: Range
) -> VetFinding:
    said = f"{'gives' if path[0] == 'give' else 'is for'} {quantity.id} {have}"
    unit = f" {quantity.unit}" if quantity.unit else ""
    return VetFinding(
        compiled.rule.place_of("rows", row, *path),
        "stop",
        "vocabulary",
        f"rule {compiled.rule.id}: row {row + 1} {said}, and the vocabulary allows {allowed}{unit}",
        "look at the unit and the decimal point, or widen the vocabulary",
    )


def curve_findings(compiled: Compiled, surface: Surface, boxes: tuple[Box, ...]) -> Iterator[VetFinding]:
    """Where no curve of an interpolated table reaches, and where two hold at once."""
    faults: dict[tuple[str, str, str, str], list[dict[str, float | str]]] = {}
    for box in boxes:
        along = body_range(box, surface.along)
        levels = [levels_of(box.levels_of(read.quantity), read.quantity.order) for read in surface.beside]
        for combination in product(*levels):
            here = dict(zip([read.name for read in surface.beside], combination, strict=True))
            for fault, at in _curve_faults(surface, along, here):
                faults.setdefault(fault, []).append({surface.along.name: at, **here})
    for (level, check, what, do), points in faults.items():
        where = "; ".join(dict.fromkeys(_levels_text(point, surface) for point in points[:_SHOWN]))
        more = f" and {len(points) - _SHOWN} more" if len(points) > _SHOWN else ""
        yield VetFinding(
            compiled.rule.place_of("rows"),
            "stop" if level == "stop" else "caution",
            check,
            f"rule {compiled.rule.id}: {what}" + (f" where {where}{more}" if where else ""),
            do,
            point_text(points[0]),
        )


def _levels_text(point: Mapping[str, float | str], surface: Surface) -> str:
    return " and ".join(f"{read.name} is {point[read.name]}" for read in surface.beside)


def _curve_faults(
    surface: Surface, along: Range, here: Mapping[str, str]
) -> Iterator[tuple[tuple[str, str, str, str], float]]:
    """What is wrong for one set of levels (level, check, what, remedy), and the number that shows it."""
    curves = [curve for curve in surface.curves if _holds(curve, surface, here)]
    if not curves:
        yield ("caution", "gaps", "no curve holds", "add its nodes, or narrow valid_within"), number_in(along)
    if len(curves) > 1:
        yield ("stop", "overlaps", "two curves hold", "give every curve levels of its own"), number_in(along)
    for curve in curves[:1]:
        nodes = Range(float(curve.at[0]), float(curve.at[-1]))
        if not within(along, nodes):
            what = f"the nodes reach over {surface.along.name} {nodes} only, and the rule lets in {along}"
            beyond = along.high if along.high > nodes.high else along.low
            yield ("caution", "gaps", what, "narrow valid_within to the nodes, or add nodes"), beyond


def _holds(curve: Curve, surface: Surface, here: Mapping[str, str]) -> bool:
    return all(curve.levels[read.name] >> read.quantity.order.index(here[read.name]) & 1 for read in surface.beside)
