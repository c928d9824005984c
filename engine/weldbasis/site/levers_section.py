"""The levers of a joint on its page: margins as bars, the small table, what stands on the edge."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from weldbasis.evaluate import Evaluation
from weldbasis.sentences import outcome_text, value_text
from weldbasis.settling.edges import Edge
from weldbasis.settling.lever_words import bar_places, change_text, edge_text, free_text, hold_text
from weldbasis.settling.levers import JointLevers, Margin, Table
from weldbasis.site.render import page
from weldbasis.words import range_text, unit_text


@dataclass(frozen=True)
class Bar:
    """A lever on the page; places are in per cent of the bar, none for a lever without numbers."""

    name: str
    now: str
    how: str
    free: str
    places: tuple[int, int, int] | None
    changes: tuple[tuple[str, bool], ...]


def levers_html(evaluation: Evaluation, row: int, found: JointLevers, near: Sequence[Edge]) -> str:
    """The section's HTML; levers that change nothing are named in one line."""
    bars = [_bar(evaluation, margin) for margin in found.margins]
    return page(
        "levers.html",
        edges=[edge_text(evaluation, row, edge) for edge in near],
        bars=[bar for bar in bars if bar.changes],
        idle=[bar.name for bar in bars if not bar.changes],
        table=_table(evaluation, found.table) if found.table else None,
    )


def _bar(evaluation: Evaluation, margin: Margin) -> Bar:
    hold = margin.hold
    changes = tuple((change_text(evaluation, hold, change), change.easier) for change in margin.changes)
    lever = hold.quantity.lever
    assert lever is not None
    places, free = None, ""
    if margin.start is not None:
        low, at, high = (round(100 * place) for place in bar_places(margin))
        places, free = (low, at, high), free_text(margin)
    return Bar(hold_text(evaluation, hold), value_text(hold.quantity, hold.now), lever.how, free, places, changes)


def _table(evaluation: Evaluation, table: Table) -> dict[str, object]:
    first, quantity = evaluation.knowledge.decisions[0], table.down.quantity
    rows = []
    for number, (value, cells) in enumerate(zip(table.rows, table.cells, strict=True)):
        words = range_text(value.low or 0.0, value.high or 0.0, quantity.decimals)
        shown = [outcome_text(first, cell).removesuffix(f" {unit_text(first.unit)}") for cell in cells]
        marks = [number == table.row and n == table.column for n in range(len(cells))]
        rows.append((words, number == table.row, list(zip(shown, marks, strict=True))))
    across = table.across.quantity.title.lower()
    return {
        "title": f"{first.title}, {unit_text(first.unit)}, by {quantity.title.lower()} and {across}",
        "unit": unit_text(quantity.unit),
        "columns": [(name, number == table.column) for number, name in enumerate(table.columns)],
        "rows": rows,
    }
