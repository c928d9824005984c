"""`weldbasis levers`: how close a joint is to tipping, and what would relax it."""

from __future__ import annotations

import dataclasses
import datetime
import json
from pathlib import Path

import click
from rich.table import Table as Grid

from weldbasis.cli.console import CAUTION, joint_row, json_option, kb_option, rules_and_project, terminal
from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.reading import value_of
from weldbasis.sentences import outcome_text, value_text
from weldbasis.settling.against import consequences
from weldbasis.settling.edges import Edge, edges
from weldbasis.settling.lever_words import bar_places, change_text, edge_text, free_text, hold_text, setting_text
from weldbasis.settling.levers import JointLevers, Margin, Table, levers
from weldbasis.settling.wishes import Way, Wish, cheapest, read_wish, trial_of
from weldbasis.words import number_text, range_text, with_unit

_BAR = 30
_MOST_WAYS = 4


@click.command("levers")
@click.argument("project", type=click.Path(path_type=Path, exists=True))
@click.argument("joint")
@click.option(
    "--wish",
    default=None,
    metavar="TEXT",
    help='A wished decision, for example "min_preheat <= 20" or "hydrogen class >= H10".',
)
@kb_option
@json_option
def command(project: Path, joint: str, wish: str | None, kb: Path | None, as_json: bool) -> None:
    """Show what can be chosen for JOINT in PROJECT, and how far each choice is from changing a decision.

    A bar runs over all that the shop can set, with the part in which the first decision stays as it is. With
    --wish, the cheapest ways to a wished decision: the fewest levers, then the smallest change against what
    stands there now (of levels, against all of them).
    """
    knowledge, chosen = rules_and_project(project, kb, datetime.date.today())
    row = joint_row(chosen, joint)
    try:
        wished = read_wish(wish, knowledge) if wish else None
    except ValueError as fault:
        raise click.BadParameter(str(fault), param_hint="--wish") from fault
    evaluation = evaluate(knowledge, chosen.facts)
    found, near = levers(evaluation, [row])[row], edges(evaluation, [row]).get(row, ())
    ways = cheapest(evaluation, row, wished) if wished else []
    if as_json:
        click.echo(json.dumps(_data(evaluation, row, found, near, ways), ensure_ascii=False, indent=1))
        return
    _show(evaluation, row, found, near)
    if wished:
        _show_ways(evaluation, row, wished, ways)
    click.echo(CAUTION)


def _show(evaluation: Evaluation, row: int, found: JointLevers, near: tuple[Edge, ...]) -> None:
    console = terminal()
    first = evaluation.knowledge.decisions[0]
    value = outcome_text(first, value_of(evaluation.columns[first.id], first, row))
    console.print(f"[bold]{evaluation.facts.joints[row]}[/bold]  {first.title}: [bold]{value}[/bold]")
    for edge in near:
        console.print(f"[bold]edge[/bold] {edge_text(evaluation, row, edge)}")
    for margin in found.margins:
        hold = margin.hold
        console.print(f"\n[bold]{hold_text(evaluation, hold)}[/bold]: {value_text(hold.quantity, hold.now)}")
        if margin.start is not None:
            console.print(f"  {_bar(margin)} {free_text(margin)}")
        for change in margin.changes:
            console.print(
                f"  {change_text(evaluation, hold, change)} [dim]({'less' if change.easier else 'more'})[/dim]"
            )
        if not margin.changes:
            console.print("  changes no decision")
        lever = hold.quantity.lever
        if lever:
            console.print(f"  [dim]{lever.how}[/dim]")
    if found.table:
        _show_table(evaluation, found.table)


def _bar(margin: Margin) -> str:
    low, at, high = (round(place * (_BAR - 1)) for place in bar_places(margin))
    return "".join("●" if n == at else "━" if low <= n <= high else "·" for n in range(_BAR))


def _show_table(evaluation: Evaluation, table: Table) -> None:
    first, quantity = evaluation.knowledge.decisions[0], table.down.quantity
    title = f"\n{first.title} by {quantity.title.lower()} and {table.across.quantity.title.lower()}"
    grid = Grid(title=title, title_justify="left", pad_edge=False, box=None, padding=(0, 1))
    grid.add_column(with_unit("", quantity.unit).strip(), no_wrap=True)
    for number, name in enumerate(table.columns):
        grid.add_column(f"{name} (now)" if number == table.column else name)
    for number, (value, cells) in enumerate(zip(table.rows, table.cells, strict=True)):
        words = range_text(value.low or 0.0, value.high or 0.0, quantity.decimals)
        shown = [outcome_text(first, cell) for cell in cells]
        if number == table.row and table.column >= 0:
            shown[table.column] = f"[bold]{shown[table.column]}[/bold]"
        grid.add_row(f"{words} (now)" if number == table.row else words, *shown)
    terminal().print(grid)


def _show_ways(evaluation: Evaluation, row: int, wish: Wish, ways: list[Way]) -> None:
    console = terminal()
    value = setting_text(wish.decision, wish.value)
    console.print(f"\n[bold]To reach {wish.decision.title.lower()} {wish.sign} {value}[/bold]")
    if not ways:
        console.print("  No lever of this joint reaches it, nor any two together.")
    for number, way in enumerate(ways[:_MOST_WAYS]):
        console.print(f"  {_way_text(evaluation, way)}: {outcome_text(wish.decision, way.becomes)}")
        if way.settings and number == 0:
            changed, findings = consequences(evaluation, trial_of(row, way.settings))
            others = [f"{q.title.lower()} {outcome_text(q, v)}" for q, v in changed if q.id != wish.decision.id]
            if others:
                console.print(f"    with it: {', '.join(others)}")
            for finding in findings:
                console.print(f"    [bold]{finding.level}[/bold] {finding.text.replace('[', chr(92) + '[')}")
    if ways and ways[0].settings:
        console.print("  [dim]Fewest levers first, then the smallest change against the present value.[/dim]")


def _way_text(evaluation: Evaluation, way: Way) -> str:
    if not way.settings:
        return "It stands so already"
    parts = []
    for setting in way.settings:
        hold = setting.hold
        now = value_text(hold.quantity, hold.now)
        share = f", {number_text(100 * setting.share, 0)} %"
        name = hold_text(evaluation, hold)
        parts.append(f"{name} {now} → {setting_text(hold.quantity, setting.name)}{share}")
    return " and ".join(parts)


def _data(
    evaluation: Evaluation, row: int, found: JointLevers, near: tuple[Edge, ...], ways: list[Way]
) -> dict[str, object]:
    """The same as plain data for a script; the format is versioned."""
    margins = [
        {
            "lever": dataclasses.asdict(margin.hold.ref),
            "now": dataclasses.asdict(margin.hold.now),
            "no_change": None if margin.low is None else [margin.low, margin.high],
            "changes": [dataclasses.asdict(change) for change in margin.changes],
        }
        for margin in found.margins
    ]
    table = found.table and {
        "rows": [[value.low, value.high] for value in found.table.rows],
        "columns": list(found.table.columns),
        "cells": [[dataclasses.asdict(cell) for cell in cells] for cells in found.table.cells],
    }
    return {
        "format": "weldbasis-levers/1",
        "joint": evaluation.facts.joints[row],
        "levers": margins,
        "table": table,
        "edges": [dataclasses.asdict(edge) for edge in near],
        "ways": [
            {
                "settings": [
                    {"lever": dataclasses.asdict(s.hold.ref), "to": s.name, "share": s.share} for s in way.settings
                ],
                "becomes": dataclasses.asdict(way.becomes),
            }
            for way in ways
        ],
    }
