"""`weldbasis freeze`: release the rule set."""

from __future__ import annotations

import datetime
import re
from pathlib import Path

import click

from weldbasis.authority.releases import news, release_data, releases_of, version_problems
from weldbasis.cli.console import private_key
from weldbasis.load.knowledge import knowledge_of
from weldbasis.load.layers import read_layers
from weldbasis.places import kb_folder
from weldbasis.problem import Place, Problem, Refused
from weldbasis.record import canonical_bytes, write_aside
from weldbasis.vet import vet
from weldbasis.words import counted

_NAME = r"[A-Za-z0-9][A-Za-z0-9.-]*"


@click.command("freeze")
@click.argument("release")
@click.option(
    "--kb",
    type=click.Path(path_type=Path, exists=True, file_okay=False),
    default=None,
    help="The set of rules to release: a folder with kb.yaml. Without it, the published practice.",
)
@click.option(
    "--key",
    type=click.Path(path_type=Path, exists=True, dir_okay=False),
    default=None,
    help="A private Ed25519 key in PEM form to sign with. It is read and kept nowhere.",
)
@click.option("--on", "date", default=None, metavar="DATE", help="The day of the release. Without it: today.")
def command(release: str, kb: Path | None, key: Path | None, date: str | None) -> None:
    """Freeze the set of rules as RELEASE, for example 2027.1.

    Writes releases/RELEASE.json, the layers in canonical JSON with their digest, and NEWS.md, what every
    release changes. A release is never edited; a project pins it with `rules: RELEASE`.

    Refused where vet finds what stops work, or where a rule changed its meaning and kept its version.
    """
    folder = kb or kb_folder()
    _check_name(folder, release)
    stack = read_layers(folder)
    knowledge = knowledge_of(stack)
    releases = releases_of(folder)
    found = [*version_problems(knowledge, releases)]
    stops = vet(knowledge).stops
    if found or stops:
        for finding in stops:
            click.echo(str(finding), err=True)
        for problem in found:
            click.echo(str(problem), err=True)
        click.echo(f"{counted(len(found) + len(stops), 'finding')} to mend first; nothing was released.", err=True)
        raise click.exceptions.Exit(1)
    data = release_data(
        stack, release, _day(date), releases[-1] if releases else None, private_key(key) if key else None
    )
    path = folder / "releases" / f"{release}.json"
    write_aside(path, canonical_bytes(data))
    write_aside(folder / "NEWS.md", news(knowledge.title, releases_of(folder)).encode("utf-8"))
    click.echo(f"{path}: {data['digest'][:19]}…, {'signed' if key else 'not signed'}")
    click.echo(f"{folder / 'NEWS.md'}: what it changes")


def _check_name(folder: Path, release: str) -> None:
    path = folder / "releases" / f"{release}.json"
    if not re.fullmatch(_NAME, release) or release == "working":
        raise click.BadParameter("use letters, digits, '.' and '-', for example 2027.1", param_hint="RELEASE")
    if path.exists():
        why, do = "a release is never edited", "give the new one another name"
        raise Refused([Problem(Place(str(path)), f"release {release!r} exists already", why, do)])


def _day(date: str | None) -> str:
    try:
        return datetime.date.fromisoformat(date).isoformat() if date else datetime.date.today().isoformat()
    except ValueError as fault:
        raise click.BadParameter("write year-month-day, for example 2027-01-15", param_hint="--on") from fault
