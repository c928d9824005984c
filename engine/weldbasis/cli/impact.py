"""`weldbasis impact`: what a change from rule set A to B does to projects."""

from __future__ import annotations

import json
from collections import Counter
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import click
from rich.table import Table
from rich.text import Text

from weldbasis.authority.impact import Cause, Move, ProjectImpact, Way, impact
from weldbasis.cli.console import CAUTION, json_option, kb_option, terminal
from weldbasis.knowledge import Knowledge
from weldbasis.project.pinned import project_document, rules_folder, rules_named
from weldbasis.words import counted

_MOST = 12
_WAYS: Mapping[Way, str] = {"stricter": "stricter", "looser": "looser", "otherwise": "other"}


@click.command("impact")
@click.argument("before", metavar="A")
@click.argument("after", metavar="B")
@click.argument("projects", nargs=-1, required=True, type=click.Path(path_type=Path, exists=True))
@click.option("--all", "everything", is_flag=True, help="Every move, not only the first of each change.")
@kb_option
@json_option
def command(
    before: str, after: str, projects: tuple[Path, ...], everything: bool, kb: Path | None, as_json: bool
) -> None:
    """Show what going from rule set A to B moves in PROJECTS: decisions, who governs them, findings.

    A and B are `working`, the name of a release, the file of a release, or a folder of rules. Moves are
    grouped by the change that brings them, found by switching changes on one at a time; what asks for more
    and what asks for less stand apart.
    """
    folder = rules_folder(projects[0], project_document(projects[0]), kb)
    sets = rules_named(before, folder), rules_named(after, folder)
    found = impact(*sets, projects)
    if as_json:
        click.echo(json.dumps(impact_data(sets, found), ensure_ascii=False, indent=1))
        return
    for project in found:
        _show(project, sets, everything)
    joints = sum(len(project.joints) for project in found)
    total = sum(len(project.project.facts.joints) for project in found)
    moves = [move for project in found for move in project.moves]
    click.echo(f"{joints} of {counted(total, 'joint')} move: {_ways(moves)}.")
    click.echo(CAUTION)


def impact_data(sets: tuple[Knowledge, Knowledge], found: Sequence[ProjectImpact]) -> dict[str, Any]:
    """The impact as plain data for a script; the format is versioned."""
    named = [{"release": rules.release, "digest": rules.digest} for rules in sets]
    return {
        "format": "weldbasis-impact/1",
        "before": named[0],
        "after": named[1],
        "projects": [
            {
                "project": one.project.id,
                "joints": len(one.project.facts.joints),
                "moves": [_move_data(move) for move in one.moves],
                "causes": [
                    {
                        "changes": [
                            {"of": d.of, "id": d.id, "how": d.how, "parts": list(d.parts)} for d in cause.differences
                        ],
                        "moves": [_move_data(move) for move in cause.moves],
                    }
                    for cause in one.causes
                ],
                "only_together": list(one.together),
            }
            for one in found
        ],
    }


def _move_data(move: Move) -> dict[str, Any]:
    what = {"decision": move.decision} if move.decision else {"finding": move.finding}
    governing = {"governing_before": list(move.governing_before), "governing_after": list(move.governing_after)}
    found = {"joint": move.joint, **what, "before": move.before, "after": move.after, "way": move.way}
    return {**found, **governing} if move.decision else found


def _show(found: ProjectImpact, sets: tuple[Knowledge, Knowledge], everything: bool) -> None:
    console = terminal()
    head = f"{found.project.title}: {len(found.joints)} of {counted(len(found.project.facts.joints), 'joint')} move"
    console.print(f"\n[bold]{head}[/bold]")
    for cause in sorted(found.causes, key=lambda cause: -len(cause.moves)):
        _show_cause(cause, sets, everything)
    if found.together:
        names = ", ".join(found.together[:_MOST]) + (", …" if len(found.together) > _MOST else "")
        console.print(f"  Only where several changes meet: {names}")


def _show_cause(cause: Cause, sets: tuple[Knowledge, Knowledge], everything: bool) -> None:
    console = terminal()
    console.print(f"\n  {cause.name}: {_ways(cause.moves)}", highlight=False)
    for difference in cause.differences:
        for entry in difference.why:
            console.print(f"    version {entry.version}: {entry.what}. {entry.why}", highlight=False)
        if not difference.why and difference.amendment:
            console.print(f"    {difference.amendment.how}: {difference.amendment.why}", highlight=False)
    table = Table.grid(padding=(0, 2))
    for way in _WAYS:
        moves = [move for move in cause.moves if move.way == way]
        for move in moves if everything else moves[:_MOST]:
            table.add_row("  ", _WAYS[way], Text(move.joint), Text(_move_text(move, sets)))
        if len(moves) > _MOST and not everything:
            table.add_row("  ", _WAYS[way], "…", f"and {len(moves) - _MOST} more; see them with --all")
    console.print(table)


def _move_text(move: Move, sets: tuple[Knowledge, Knowledge]) -> str:
    if not move.decision:
        rule = sets[1].rules.get(move.finding) or sets[0].rules[move.finding]
        return f"{rule.title}: {move.before} → {move.after}"
    title = sets[1].quantities[move.decision].title
    if move.before != move.after:
        return f"{title} {move.before} → {move.after}"
    before, after = (", ".join(rules) or "nobody" for rules in (move.governing_before, move.governing_after))
    return f"{title} stays {move.after}; governing {before} → {after}"


def _ways(moves: Sequence[Move]) -> str:
    """How many moves ask for more, for less, or for neither."""
    ways = Counter(move.way for move in moves)
    return ", ".join(f"{ways[way]} {word}" for way, word in _WAYS.items() if ways[way]) or "nothing moves"
