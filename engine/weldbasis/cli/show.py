"""`weldbasis show`: one rule in words, with its table."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import click
from rich.markup import escape
from rich.table import Table

from weldbasis.cli.console import kb_option, terminal
from weldbasis.knowledge import Knowledge, Rule
from weldbasis.load.knowledge import load_knowledge
from weldbasis.places import kb_folder
from weldbasis.problem import nearest
from weldbasis.words import unit_text

_CHECKED = {"from-memory": "from memory", "common-practice": "common practice"}


@click.command("show")
@click.argument("rule")
@click.option("--release", default="working", metavar="NAME", help="As it stands in this release of the rules.")
@kb_option
def command(rule: str, release: str, kb: Path | None) -> None:
    """Print RULE in words: what it gives and reads, when it applies, its formula or table, its sources, its history.

    RULE is the id of a rule, for example preheat-cet-member. The file and line it comes from stand at the end.
    """
    knowledge = load_knowledge(kb or kb_folder(), with_cases=False, release=release)
    if rule not in knowledge.rules:
        raise click.BadParameter(f"no rule {rule!r}. {nearest(rule, knowledge.rules)}", param_hint="RULE")
    _show(knowledge.rules[rule], knowledge)


def _show(rule: Rule, knowledge: Knowledge) -> None:
    console = terminal()
    console.print(f"[bold]{escape(rule.title)}[/bold]")
    console.print(f"{rule.id}, version {rule.version}, a {rule.kind} for each {rule.for_each}, layer {rule.layer}")
    for name in rule.gives:
        quantity = knowledge.quantities[name]
        console.print(f"Gives {escape(quantity.title)} ({name}{_unit(quantity.unit)}).")
    for read in rule.reads:
        quantity = knowledge.quantities[read.quantity]
        console.print(
            f"Reads {read.name}: {escape(quantity.title)} ({quantity.id}{_unit(read.unit or quantity.unit)})."
        )
    for head, condition in (("Applies when", rule.applies_when), ("Valid within", rule.valid_within)):
        if condition:
            console.print(f"{head} {escape(_condition(condition))}.", highlight=False)
    _show_body(rule)
    console.print(f"It says: {escape(rule.say)}", highlight=False)
    for cite in rule.cites:
        checked = _CHECKED.get(cite.checked, cite.checked)
        console.print(f"Source: {escape(cite.source)}, {escape(cite.at)} ({checked}) {escape(cite.covers)}".rstrip())
    if rule.note:
        console.print(escape(rule.note), highlight=False)
    for change in rule.changes:
        told = f"{change.what.rstrip('.')}. {change.why} ({change.approved_by})"
        console.print(f"Version {change.version}, {change.date}: {escape(told)}", highlight=False)
    console.print(str(rule.place), highlight=False)


def _unit(unit: str) -> str:
    return f", {unit_text(unit)}" if unit else ""


def _condition(condition: Mapping[str, Any]) -> str:
    words = []
    for name, wanted in condition.items():
        if name == "any_of":
            words.append("(" + " or ".join(_condition(part) for part in wanted) + ")")
        else:
            words.append(f"{name} is {_cell(wanted)}")
    return " and ".join(words)


def _cell(value: Any) -> str:
    if isinstance(value, list | tuple):
        return " or ".join(map(str, value))
    if isinstance(value, Mapping):
        return ", ".join(f"{key} {_cell(inner)}" for key, inner in value.items())
    return str(value)


def _show_body(rule: Rule) -> None:
    console = terminal()
    rows = rule.body.get("rows")
    for key, value in rule.body.items():
        if key != "rows":
            console.print(f"{key.replace('_', ' ')}: {escape(_cell(value))}", highlight=False)
    if rows:
        names = list(dict.fromkeys(name for row in rows for name in row.get("when", {})))
        table = Table(box=None, pad_edge=False, padding=(0, 2))
        for name in (*names, "gives"):
            table.add_column(name)
        for row in rows:
            when = row.get("when", {})
            table.add_row(*(escape(_cell(when.get(name, "any"))) for name in names), escape(_cell(row["give"])))
        console.print(table)
