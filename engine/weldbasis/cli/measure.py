"""The two long looks of `weldbasis vet`: are the figures guarded, and do directions hold over pairs of joints?"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from weldbasis.cli.console import progress
from weldbasis.graph import build_graph
from weldbasis.knowledge import Knowledge
from weldbasis.load.yaml_text import read_yaml
from weldbasis.places import site_folder
from weldbasis.record import canonical_bytes, write_aside
from weldbasis.survey.directions import audit
from weldbasis.survey.directions import summary as directions_summary
from weldbasis.survey.guard import guard
from weldbasis.survey.guard import summary as figures_summary
from weldbasis.words import counted

_JOINTS = 25_000
_MOST = 15


def look_at_figures(knowledge: Knowledge, write: Path | None) -> None:
    """Nudge every figure and say which nudges nothing notices."""
    with progress("nudging figures", len(knowledge.rules)) as bar:
        task = bar.task_ids[0]
        found = guard(knowledge, build_graph(knowledge), done=lambda n: bar.update(task, completed=n))
    data = figures_summary(knowledge, found)
    share = 100 * data["guarded"] / data["figures"]
    figures = counted(data["figures"], "figure")
    click.echo(f"{data['guarded']} of {figures} guarded ({share:.1f} %), both a little lower and a little higher.")
    click.echo(f"{data['nudges_noticed']} of {2 * data['figures']} nudges are noticed by a case or a proof.")
    for one in data["unguarded"][:_MOST]:
        click.echo(f"  {one['rule']}, {one['where']}: {one['figure']} {' and '.join(one['unnoticed'])} goes unnoticed")
    if len(data["unguarded"]) > _MOST:
        click.echo(f"  … and {len(data['unguarded']) - _MOST} more; --write keeps them all in a file")
    _keep(data, write)


def look_at_directions(knowledge: Knowledge, write: Path | None) -> None:
    """Compare pairs of joints and say where more of an input asks for less."""
    draw = read_yaml(site_folder() / "measured" / "directions-draw.yaml").data
    data = directions_summary(knowledge, audit(knowledge, build_graph(knowledge), _JOINTS, draw))
    click.echo(
        f"{counted(data['pairs'], 'pair')} of joints that differ in one input, which can only make matters worse:"
    )
    for one in data["directions"]:
        click.echo(
            f"  {one['input']}: {one['pairs']} compared, the preheat falls in {one['fell']}; "
            f"{one['lost']} leave every method, {one['gained']} enter one"
        )
        if "worst" in one:
            given = ", ".join(f"{name} {value}" for name, value in one["worst"]["given"].items())
            click.echo(f"    worst: {one['worst']['before']:.0f} °C → {one['worst']['after']:.0f} °C at {given}")
    _keep(data, write)


def _keep(data: dict[str, Any], write: Path | None) -> None:
    if write is not None:
        write_aside(write, canonical_bytes(data))
        click.echo(f"Kept in {write}.")
