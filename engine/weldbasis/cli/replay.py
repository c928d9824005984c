"""`weldbasis replay`: recompute a record and compare, byte by byte."""

from __future__ import annotations

from pathlib import Path

import click

from weldbasis.cli.console import kb_option, rules_and_project
from weldbasis.evaluate import evaluate
from weldbasis.narrow import narrowed
from weldbasis.problem import Place, Problem, Refused
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

    Needs no network. Says "same bytes" and ends with 0, or names every joint and figure that differs and
    ends with 1. Rules that have changed since are named as the cause by their digest.
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
    fresh = record_of(project, narrowed(evaluate(knowledge, project.facts)))
    found = replay(kept, fresh)
    if not found:
        joints, rules = counted(len(fresh["joints"]), "joint"), fresh["rules"]["digest"][:19]
        click.echo(f"{record}: same bytes; {joints}, rules {rules}…")
        return
    for line in found[:_MOST_LINES]:
        click.echo(line)
    if len(found) > _MOST_LINES:
        click.echo(f"… and {len(found) - _MOST_LINES} more differences")
    raise click.exceptions.Exit(1)
