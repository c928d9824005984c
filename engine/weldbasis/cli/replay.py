"""`weldbasis replay`: recompute a record and compare, byte by byte."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import click

from weldbasis.authority.sign_offs import SIGN_OFFS, read_sign_offs, standing_of
from weldbasis.cli.console import kb_option, rules_and_project
from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.narrow import narrowed
from weldbasis.problem import Place, Problem, Refused
from weldbasis.project import Project
from weldbasis.record import read_record, record_of, replay
from weldbasis.words import counted

_MOST_LINES = 40


@click.command("replay")
@click.argument("record", type=click.Path(path_type=Path, exists=True, dir_okay=False))
@click.option(
    "--project",
    "folder",
    type=click.Path(path_type=Path, exists=True),
    default=None,
    help="The project the record is of. Without it: the folder the record lies in.",
)
@kb_option
def command(record: Path, folder: Path | None, kb: Path | None) -> None:
    """Decide the project of RECORD afresh and compare with what the record says.

    Needs no network. Says "same bytes", how every sign-off stands, and ends with 0; or names every joint and
    figure that differs, or a sign-off whose signature does not hold, and ends with 1. Rules that have changed
    since are named as the cause by their digest.
    """
    kept = record.read_bytes()
    read_record(record, kept)
    place = folder or record.resolve().parent
    if not (place / "project.yaml").exists() and place.is_dir():
        raise Refused(
            [
                Problem(
                    Place(str(record)),
                    f"there is no project.yaml in {place}",
                    "a record is replayed from its project's inputs",
                    "name the folder with --project",
                )
            ]
        )
    knowledge, project = rules_and_project(place, kb)
    evaluation = narrowed(evaluate(knowledge, project.facts))
    fresh = record_of(project, evaluation)
    found = replay(kept, fresh)
    if not found:
        joints, rules = counted(len(fresh["joints"]), "joint"), fresh["rules"]["digest"][:19]
        click.echo(f"{record}: same bytes; {joints}, rules {rules}…")
        _show_sign_offs(project, fresh, evaluation)
        return
    for line in found[:_MOST_LINES]:
        click.echo(line)
    if len(found) > _MOST_LINES:
        click.echo(f"… and {len(found) - _MOST_LINES} more differences")
    raise click.exceptions.Exit(1)


def _show_sign_offs(project: Project, record: Mapping[str, Any], evaluation: Evaluation) -> None:
    """How the project's sign-offs stand against the record; a false one ends with 1."""
    shown = str(project.folder / SIGN_OFFS)
    sign_offs = read_sign_offs(project.folder, project.facts.joints, shown)
    found = standing_of(sign_offs, record, evaluation, project.folder)
    for one in found:
        what = f"{one.sign_off.joint} {one.sign_off.decision}".rstrip()
        by = f"{one.sign_off.name}, {one.sign_off.role}, {one.sign_off.date}"
        proof = ", signature holds" if one.sign_off.signature and one.state != "false" else ""
        click.echo(f"{one.state} {what}: {by}{proof}")
        for line in one.changes:
            click.echo(f"    {line}")
    if any(one.state == "false" for one in found):
        for one in found:
            if one.fault:
                click.echo(f"{one.sign_off.place}: {one.fault}", err=True)
        raise click.exceptions.Exit(1)
