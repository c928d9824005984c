"""`weldbasis vet`: is the rule set sound?"""

from __future__ import annotations

import dataclasses
import datetime
import json
import time
from collections.abc import Callable
from pathlib import Path

import click

from weldbasis.authority.releases import releases_of, version_problems
from weldbasis.cases import nature_counts
from weldbasis.cli.console import json_option, progress
from weldbasis.cli.measure import look_at_directions, look_at_figures
from weldbasis.graph import build_graph
from weldbasis.knowledge import Knowledge
from weldbasis.load.knowledge import load_knowledge
from weldbasis.places import kb_folder
from weldbasis.problem import Refused
from weldbasis.proofs.finding import VetFinding
from weldbasis.survey.soundness import try_points
from weldbasis.vet import VetReport, from_escape, from_problem, vet, with_problems
from weldbasis.words import places

_PAUSE_S = 0.5  # between two looks at the files
_SCREEN = 7  # findings of three lines or so that fit a screen with the summary


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
@click.option("--figures", is_flag=True, help="Nudge every figure: does a case or a proof notice? Takes a minute.")
@click.option(
    "--directions", is_flag=True, help="Does more carbon, thickness, hydrogen or restraint ever ask for less?"
)
@click.option(
    "--write",
    type=click.Path(path_type=Path, dir_okay=False),
    default=None,
    help="Keep what --figures or --directions found in this file.",
)
@click.option("--watch", is_flag=True, help="Look again whenever a file of the rules is saved, until stopped.")
@click.option("--all", "every", is_flag=True, help="Every finding, not only the first of each sort.")
@json_option
def command(
    kb: Path | None,
    points: int,
    quiet: bool,
    figures: bool,
    directions: bool,
    write: Path | None,
    watch: bool,
    every: bool,
    as_json: bool,
) -> None:
    """Look over the rule set in the folder KB (without it: the published practice).

    Checks the files against their schemas, that names and units fit the vocabulary, that the rules close no
    circle, and that every case comes out as its source says. Proves, over all that a rule lets in, that
    tables leave no gap and contradict themselves nowhere, that formulas have a value and move the way
    the rule says, and that no rule is wider than its source. Also that amendments of a house layer do what
    they say, and that no rule changed its meaning since the last release without a new version. Each
    finding names file, line and column, values that show it, and what to do.

    Exit code 1 when something must be mended before the rules are used.
    """
    if figures or directions:
        knowledge = load_knowledge(kb or kb_folder())
        (look_at_figures if figures else look_at_directions)(knowledge, write)
        return
    folder = kb or kb_folder()
    if watch:
        _watch(folder, lambda: _show(_report(folder, 0), quiet, every))
        return
    report = _report(folder, points)
    if as_json:
        click.echo(json.dumps(_data(report), ensure_ascii=False, indent=1))
    else:
        _show(report, quiet, every)
    if report.stops:
        raise click.exceptions.Exit(1)


def _report(folder: Path, points: int) -> VetReport:
    try:
        knowledge = load_knowledge(folder)
        report = with_problems(vet(knowledge), version_problems(knowledge, releases_of(folder)), "versions")
        return _with_points(report, knowledge, points) if points else report
    except Refused as refused:
        return VetReport(tuple(from_problem(problem) for problem in refused.problems), (), {})


def _watch(folder: Path, look: Callable[[], None]) -> None:
    """Look at once, and again whenever a file of the rules has changed; ends with Ctrl-C."""
    seen: dict[Path, int] = {}
    while True:
        now = {path: path.stat().st_mtime_ns for path in folder.rglob("*.yaml")}
        if now != seen:
            seen = now
            click.echo(f"\n{datetime.datetime.now():%H:%M:%S} {folder}")
            look()
        time.sleep(_PAUSE_S)


def _with_points(report: VetReport, knowledge: Knowledge, points: int) -> VetReport:
    """The report with what random points showed."""
    with progress("points", points) as bar:

        def done(count: int) -> None:
            bar.update(bar.task_ids[0], completed=count)

        found = try_points(knowledge, build_graph(knowledge), points, done=done)
    escaped = tuple(from_escape(escape, knowledge) for escape in found.escapes)
    counts = {**report.counts, "points": found.points, "boxes": found.boxes, "escapes": len(escaped)}
    return VetReport((*report.findings, *escaped), report.cases, counts)


def _show(report: VetReport, quiet: bool, every: bool) -> None:
    chosen = report.stops if quiet else report.findings
    sorts: dict[tuple[bool, str], list[VetFinding]] = {}
    for finding in sorted(chosen, key=lambda finding: (finding.level != "stop", finding.check)):
        sorts.setdefault((finding.level != "stop", finding.check), []).append(finding)
    most = len(chosen) if every else max(1, _SCREEN // max(1, len(sorts)))
    for (_, check), found in sorts.items():
        for finding in found[:most]:
            click.echo(str(finding))
        if len(found) > most:
            click.echo(f"and {places(len(found) - most, found[0].level)} more of {check}: --all shows them")
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
        at = finding.place
        where = {"place": str(at), "file": at.file, "line": at.line, "column": at.column}
        return {**dataclasses.asdict(finding), **where}

    return {"format": "weldbasis-vet/1", "counts": report.counts, "findings": [entry(f) for f in report.findings]}
