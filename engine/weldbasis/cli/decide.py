"""`weldbasis decide`: evaluate a project, write its record, print the joint table."""

from __future__ import annotations

import datetime
import json
from collections import Counter
from dataclasses import replace
from pathlib import Path
from typing import Any

import click
from rich.table import Table

from weldbasis.authority.history import keep_record
from weldbasis.authority.sign_offs import SignOff, add_sign_off, signed_part, unknown_joint
from weldbasis.cli.console import (
    CAUTION,
    json_option,
    kb_option,
    private_key,
    progress,
    rules_and_project,
    terminal,
)
from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.narrow import narrowed
from weldbasis.problem import Place, nearest
from weldbasis.project import Project
from weldbasis.reasons import trace_joint
from weldbasis.record import canonical_bytes, digest_of, record_from_traces, write_aside
from weldbasis.settling.settle import settle
from weldbasis.trace import JointTrace
from weldbasis.views import decision_text, finding_count_text
from weldbasis.words import counted


@click.command("decide")
@click.argument("project", type=click.Path(path_type=Path, exists=True))
@click.option(
    "--record",
    type=click.Path(path_type=Path, dir_okay=False),
    default=None,
    help="Where to write the record. Without it: record.json in the project's folder.",
)
@click.option("--no-record", is_flag=True, help="Print the decisions only; write nothing.")
@click.option("--keep", is_flag=True, help="Keep the record under records/ too, for the history of the joints.")
@click.option("--sign", "signed", multiple=True, metavar="JOINT", help="Sign for this joint; may stand several times.")
@click.option("--decision", default="", metavar="ID", help="Sign for this decision only, for example min_preheat.")
@click.option("--role", default="", help="Your role, with --sign.")
@click.option("--name", default="", help="Your name or initials, with --sign.")
@click.option("--remark", default="", help="What else is to be said, with --sign.")
@click.option(
    "--key",
    type=click.Path(path_type=Path, exists=True, dir_okay=False),
    default=None,
    help="A private Ed25519 key in PEM form to sign with. It is read and kept nowhere.",
)
@kb_option
@json_option
def command(
    project: Path,
    record: Path | None,
    no_record: bool,
    keep: bool,
    signed: tuple[str, ...],
    decision: str,
    role: str,
    name: str,
    remark: str,
    key: Path | None,
    kb: Path | None,
    as_json: bool,
) -> None:
    """Decide every joint of PROJECT (a folder with project.yaml).

    Prints, for every joint, the main decisions with their state, and what stops or holds the work. The
    record holds everything in canonical JSON: the same inputs and rules always give the same bytes.

    With --sign the decisions of a joint are signed for in the project's sign-offs.yaml. A sign-off lapses as
    soon as anything that bears on what was signed changes.

    Exit code 1 when a finding stops work on a joint.
    """
    if signed and not (role and name):
        raise click.UsageError("a sign-off needs --role and --name")
    knowledge, chosen = rules_and_project(project, kb, datetime.date.today())
    evaluation = narrowed(evaluate(knowledge, chosen.facts))
    traces = decide_all(evaluation)
    data = record_from_traces(chosen, evaluation, traces)
    target = record or chosen.folder / "record.json"
    if not no_record:
        write_aside(target, canonical_bytes(data))
    if keep:
        keep_record(chosen.folder, data, datetime.date.today().isoformat())
    for joint in signed:
        _sign(chosen, data, evaluation, SignOff(joint, decision, "", role, name, "", remark, None, Place("")), key)
    if as_json:
        click.echo(json.dumps(data, ensure_ascii=False, indent=1))
    else:
        _show(chosen, evaluation, traces)
        if not no_record:
            click.echo(f"Record: {target}")
        click.echo(CAUTION)
    if any(finding.level == "stop" for trace in traces for finding in trace.findings):
        raise click.exceptions.Exit(1)


def _sign(project: Project, record: dict[str, Any], evaluation: Evaluation, wanted: SignOff, key: Path | None) -> None:
    found = next((joint for joint in record["joints"] if joint["joint"] == wanted.joint), None)
    if found is None:
        raise unknown_joint(wanted.joint, project.facts.joints, project.folder)
    decisions = [quantity.id for quantity in evaluation.knowledge.decisions]
    if wanted.decision and wanted.decision not in decisions:
        raise click.BadParameter(f"no decision {wanted.decision!r}. {nearest(wanted.decision, decisions)}")
    part = signed_part(found, wanted.decision, evaluation.graph)
    day = datetime.date.today().isoformat()
    private = private_key(key) if key else None
    add_sign_off(project.folder, replace(wanted, digest=digest_of(part), date=day), part, private)


def decide_all(evaluation: Evaluation) -> list[JointTrace]:
    """The traces of all joints, with a progress bar where that takes a while."""
    count = len(evaluation.facts.joints)
    narrowings = settle(evaluation, range(count))
    found = []
    with progress("reading reasons", count) as bar:
        for row in range(count):
            found.append(trace_joint(evaluation, row, narrowings))
            bar.advance(bar.task_ids[0])
    return found


def _show(project: Project, evaluation: Evaluation, traces: list[JointTrace]) -> None:
    console = terminal()
    quantities = evaluation.knowledge.quantities
    shown = [
        q for q in evaluation.knowledge.decisions if q.id in ("min_preheat", "max_interpass", "hydrogen_class", "pwht")
    ]
    table = Table(title=project.title, title_justify="left", pad_edge=False, box=None, padding=(0, 1))
    table.add_column("joint", no_wrap=True)
    for quantity in shown:
        table.add_column(_heading(quantity.id, quantity.title))
    table.add_column("findings")
    for trace in traces:
        by_name = {decision.ref.quantity: decision for decision in trace.decisions}
        cells = [decision_text(quantities[q.id], by_name[q.id]) for q in shown]
        table.add_row(trace.joint, *cells, finding_count_text(trace.findings))
    console.print(table)
    states = Counter(d.state for trace in traces for d in trace.decisions if not quantities[d.ref.quantity].part_of)
    click.echo(
        f"{counted(len(traces), 'joint')}: "
        + ", ".join(f"{counted(states[s], 'decision')} {s}" for s in ("settled", "open", "uncovered"))
    )
    for trace in traces:
        for finding in trace.findings:
            if finding.level == "stop":
                click.echo(f"STOP {trace.joint}: {finding.text}")
    if project.rules == "working":
        click.echo("Rules: working, not released.")


def _heading(name: str, title: str) -> str:
    return {"min_preheat": "preheat", "max_interpass": "interpass max", "hydrogen_class": "hydrogen"}.get(
        name, title.lower() if len(title) < 14 else name
    )
