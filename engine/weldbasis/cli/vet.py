"""`weldbasis vet`: is the rule set sound?"""

from __future__ import annotations

import dataclasses
import json
from pathlib import Path

import click

from weldbasis.cases import nature_counts
from weldbasis.cli.console import json_option, progress
from weldbasis.graph import build_graph
from weldbasis.knowledge import Knowledge
from weldbasis.load.knowledge import load_knowledge
from weldbasis.places import kb_folder
from weldbasis.problem import Refused
from weldbasis.releases import releases_of, version_problems
from weldbasis.soundness import try_points
from weldbasis.vet import VetFinding, VetReport, from_escape, from_problem, vet, with_problems
from weldbasis.words import places


@click.command("vet")
@click.argument("kb", type=click.Path(path_type=Path, exists=True, file_okay=False), required=False)
@click.option(
    "--points",
    type=click.IntRange(min=0),
    default=0,
    metavar="N",
    help="Also decide boxes of inputs drawn at random, and N points inside them: none may leave its box's set.",
)
@click.option("--quiet", is_flag=True, help="Only what stops work, and the summary.")
@json_option
def command(kb: Path | None, points: int, quiet: bool, as_json: bool) -> None:
    """Look over the rule set in the folder KB (without it: the published practice).

    Checks the files against their schemas, that names and units fit the vocabulary, that the rules close no
    circle, that tables leave no gap, that stated directions hold, that every case comes out as its source
    says, that amendments of a house layer do what they say, and that no rule changed its meaning since the
    last release without a new version. Each finding names file, line and column, and what to do.

    Exit code 1 when something must be mended before the rules are used.
    """
    try:
        folder = kb or kb_folder()
        knowledge = load_knowledge(folder)
        report = with_problems(vet(knowledge), version_problems(knowledge, releases_of(folder)), "versions")
        if points:
            report = _with_points(report, knowledge, points)
    except Refused as refused:
        report = VetReport(tuple(from_problem(problem) for problem in refused.problems), (), {})
    if as_json:
        click.echo(json.dumps(_data(report), ensure_ascii=False, indent=1))
    else:
        _show(report, quiet)
    if report.stops:
        raise click.exceptions.Exit(1)


def _with_points(report: VetReport, knowledge: Knowledge, points: int) -> VetReport:
    """The report with what random points showed."""
    with progress("points", points) as bar:

        def done(count: int) -> None:
            bar.update(bar.task_ids[0], completed=count)

        found = try_points(knowledge, build_graph(knowledge), points, done=done)
    escaped = tuple(from_escape(escape, knowledge) for escape in found.escapes)
    counts = {**report.counts, "points": found.points, "boxes": found.boxes, "escapes": len(escaped)}
    return VetReport((*report.findings, *escaped), report.cases, counts)


def _show(report: VetReport, quiet: bool) -> None:
    for finding in report.stops if quiet else report.findings:
        click.echo(str(finding))
    if report.counts:
        click.echo(", ".join(f"{count} {name}" for name, count in report.counts.items()))
        natures = nature_counts(tuple(result.case for result in report.cases))
        click.echo("cases by nature: " + ", ".join(f"{count} {name}" for name, count in natures.items()))
    cautions = len(report.findings) - len(report.stops)
    click.echo(
        f"{places(len(report.stops), 'finding')} that {'stops' if len(report.stops) == 1 else 'stop'} work, "
        f"{places(cautions, 'caution')}"
    )


def _data(report: VetReport) -> dict[str, object]:
    def entry(finding: VetFinding) -> dict[str, object]:
        return {**dataclasses.asdict(finding), "place": str(finding.place)}

    return {"format": "weldbasis-vet/1", "counts": report.counts, "findings": [entry(f) for f in report.findings]}
