"""`weldbasis why`: the reasons of one joint, in the terminal."""

from __future__ import annotations

import dataclasses
import datetime
import json
from pathlib import Path

import click
from rich.padding import Padding

from weldbasis.cli.console import CAUTION, joint_row, json_option, kb_option, rules_and_project, terminal
from weldbasis.cli.why_not import show_why_not
from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.narrow import narrowed
from weldbasis.problem import nearest
from weldbasis.reasons import bears_on_text, trace_joint
from weldbasis.sentences import value_text
from weldbasis.settling.against import why_not_value
from weldbasis.settling.wishes import read_wish
from weldbasis.trace import Decision, JointTrace, Ref, Step
from weldbasis.views import decision_text


@click.command("why")
@click.argument("project", type=click.Path(path_type=Path, exists=True))
@click.argument("joint")
@click.option(
    "--decision",
    "wanted",
    default=None,
    metavar="ID",
    help="Only this decision, for example min_preheat. Any other quantity of the vocabulary works too.",
)
@click.option(
    "--not",
    "instead",
    default=None,
    metavar="TEXT",
    help='Why not another value, for example "preheat 50" or "hydrogen class H15": what stands against it.',
)
@click.option("--all", "everything", is_flag=True, help="Every step, also those that gave nothing.")
@kb_option
@json_option
def command(
    project: Path,
    joint: str,
    wanted: str | None,
    instead: str | None,
    everything: bool,
    kb: Path | None,
    as_json: bool,
) -> None:
    """Say why: the decisions of JOINT in PROJECT, each as a chain of sentences down to the inputs.

    Every line names the rule it comes from in brackets; `weldbasis publish` makes the same trace a page
    with a link to the rule and its source at every step.
    """
    knowledge, chosen = rules_and_project(project, kb, datetime.date.today())
    row = joint_row(chosen, joint)
    try:
        wish = read_wish(instead, knowledge) if instead else None
    except ValueError as fault:
        raise click.BadParameter(str(fault), param_hint="--not") from fault
    evaluation = narrowed(evaluate(knowledge, chosen.facts))
    if wish:
        show_why_not(evaluation, row, why_not_value(evaluation, row, wish), as_json)
        return
    trace = trace_joint(evaluation, row)
    if wanted and wanted not in knowledge.quantities:
        raise click.BadParameter(
            f"no quantity {wanted!r}. {nearest(wanted, knowledge.quantities)}", param_hint="--decision"
        )
    if as_json:
        click.echo(json.dumps(trace_data(trace), ensure_ascii=False, indent=1))
        return
    console = terminal()
    console.print(f"[bold]{trace.joint}[/bold]  {', '.join(trace.members)}")
    if trace.in_parts:
        console.print(_plain(trace.in_parts))
    for decision in trace.decisions:
        if wanted in (None, decision.ref.quantity) and (everything or wanted or decision.state != "uncovered"):
            _show_decision(evaluation, trace, decision, everything or wanted is not None)
    if wanted and wanted not in {decision.ref.quantity for decision in trace.decisions}:
        for ref, step in trace.steps.items():
            if ref.quantity == wanted:
                _show_step(evaluation, step, 0, full=True)
        console.print(Padding("Bears on: " + (", ".join(bears_on_text(evaluation, wanted)) or "no decision"), (1, 0)))
    if not wanted:
        for finding in trace.findings:
            console.print(f"[bold]{finding.level}[/bold] {_plain(finding.text)} [dim]\\[{finding.rule}][/dim]")
    click.echo(CAUTION)


def trace_data(trace: JointTrace) -> dict[str, object]:
    """The trace as plain data for a script; the format is versioned."""
    steps = [dataclasses.asdict(step) for step in trace.steps.values()]
    return {
        "format": "weldbasis-trace/1",
        "joint": trace.joint,
        "members": list(trace.members),
        "decisions": [dataclasses.asdict(decision) for decision in trace.decisions],
        "findings": [dataclasses.asdict(finding) for finding in trace.findings],
        "steps": steps,
        "in_parts": trace.in_parts,
    }


def _show_decision(evaluation: Evaluation, trace: JointTrace, decision: Decision, full: bool) -> None:
    quantity = evaluation.knowledge.quantities[decision.ref.quantity]
    if quantity.part_of and decision.state == "uncovered":
        return
    console = terminal()
    console.print(f"\n[bold]{quantity.title}: {decision_text(quantity, decision)}[/bold]")
    depths = _depths(trace, decision)
    for ref in decision.chain:
        step = trace.steps[ref]
        if full or step.state != "given" or depths[ref] <= 2:
            _show_step(evaluation, step, depths[ref], full)


def _depths(trace: JointTrace, decision: Decision) -> dict[Ref, int]:
    depths = {decision.ref: 0}
    for ref in decision.chain:
        for below in [c.ref for c in trace.steps[ref].candidates if c.governs] or trace.steps[ref].reads:
            depths.setdefault(below, depths.get(ref, 0) + 1)
    return depths


def _show_step(evaluation: Evaluation, step: Step, depth: int, full: bool) -> None:
    marks = [
        word
        for word, on in (
            ("rests on an assumption", step.value.assumed),
            ("unknown", step.value.unknown),
            ("safe, may be wide", step.value.wide),
            ("narrowed", step.value.narrowed),
        )
        if on and step.state == "gave"
    ]
    rule = f" [dim]\\[{step.rule}][/dim]" if step.rule else ""
    tail = f" [dim]({', '.join(marks)})[/dim]" if marks else ""
    indent = 2 * min(depth, 8)
    _indented(indent, f"{_plain(step.sentence)}{rule}{tail}")
    if step.figures:
        _indented(indent + 2, f"[dim]{_plain(step.figures)}[/dim]")
    for candidate in step.candidates:
        if not candidate.governs and (full or candidate.value.presence != "absent"):
            quantity = evaluation.knowledge.quantities[candidate.ref.quantity]
            value = value_text(quantity, candidate.value)
            _indented(indent + 2, f"[dim]beside: {quantity.title} {value} {_plain(candidate.remark)}[/dim]")


def _indented(columns: int, text: str) -> None:
    """One line, its continuation lines under its first word."""
    terminal().print(Padding(text, (0, 0, 0, columns)))


def _plain(text: str) -> str:
    return text.replace("[", "\\[")
