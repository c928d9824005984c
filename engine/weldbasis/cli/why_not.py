"""What stands against another value of a decision, in the terminal: `weldbasis why --not`."""

from __future__ import annotations

import dataclasses
import json

import click
from rich.padding import Padding

from weldbasis.cli.console import CAUTION, terminal
from weldbasis.evaluate import Evaluation
from weldbasis.sentences import outcome_text
from weldbasis.settling.against import WhyNot
from weldbasis.settling.lever_words import setting_text


def show_why_not(evaluation: Evaluation, row: int, found: WhyNot, as_json: bool) -> None:
    """Print the rules that stand against a value, the governing one first, with sentence and source."""
    if as_json:
        click.echo(json.dumps(_data(evaluation, row, found), ensure_ascii=False, indent=1))
        return
    console, decision = terminal(), found.wish.decision
    wished = setting_text(decision, found.wish.value)
    console.print(f"[bold]{evaluation.facts.joints[row]}[/bold]  Why not {decision.title.lower()} {wished}?")
    console.print(_answer(found, wished))
    for objection in found.objections:
        step = objection.step
        member = f" ({evaluation.facts.members[_member(evaluation, row, step.ref.member)]})" if step.ref.member else ""
        level = "governs" if objection.governs else "also"
        sure = "" if objection.surely else ", for part of what is not known"
        _line(2, f"[bold]{level}[/bold]{sure}: {_plain(step.sentence)}{member} [dim]\\[{step.rule}][/dim]")
        if step.figures:
            _line(4, f"[dim]{_plain(step.figures)}[/dim]")
        for cite in evaluation.graph.rules[step.rule].rule.cites:
            _line(4, f"[dim]{_plain(f'{cite.source}, {cite.at} ({cite.checked})')}[/dim]")
    for finding in found.checks:
        _line(2, f"[bold]{finding.level}[/bold] with it: {_plain(finding.text)} [dim]\\[{finding.rule}][/dim]")
    click.echo(CAUTION)


def _answer(found: WhyNot, wished: str) -> str:
    decision = found.wish.decision
    now = outcome_text(decision, found.now)
    if found.uncovered:
        return "No rule covers this decision: none stands against it, and none for it."
    if found.objections:
        count = len(found.objections)
        return f"The decision is {now}. {count} rule{'s ask' if count > 1 else ' asks'} for more than {wished}:"
    more = f"{wished} is more than the rules ask for. " if found.asks_more else ""
    if found.checks:
        return f"The decision is {now}. {more}No rule asks for more, but these checks fail with it:"
    return f"The decision is {now}. {more}Nothing stands against it."


def _member(evaluation: Evaluation, row: int, number: int) -> int:
    return int(evaluation.views["joint"].starts[row]) + number - 1


def _line(indent: int, text: str) -> None:
    terminal().print(Padding(text, (0, 0, 0, indent)))


def _plain(text: str) -> str:
    return text.replace("[", "\\[")


def _data(evaluation: Evaluation, row: int, found: WhyNot) -> dict[str, object]:
    return {
        "format": "weldbasis-why-not/1",
        "joint": evaluation.facts.joints[row],
        "decision": found.wish.decision.id,
        "value": found.wish.value,
        "now": dataclasses.asdict(found.now),
        "asks_more": found.asks_more,
        "uncovered": found.uncovered,
        "against": [
            {
                "rule": o.step.rule,
                "governs": o.governs,
                "surely": o.surely,
                "quantity": dataclasses.asdict(o.step.ref),
                "value": dataclasses.asdict(o.step.value),
                "sentence": o.step.sentence,
                "cites": [dataclasses.asdict(cite) for cite in evaluation.graph.rules[o.step.rule].rule.cites],
            }
            for o in found.objections
        ],
        "checks": [dataclasses.asdict(finding) for finding in found.checks],
    }
