"""What the commands share: the terminal, loading knowledge and projects, the caution under every table."""

from __future__ import annotations

import datetime
import sys
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING

import click
from rich.console import Console
from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn

from weldbasis.knowledge import Knowledge
from weldbasis.problem import Place, Problem, Refused
from weldbasis.project import Project, read_project
from weldbasis.project.concessions import expired
from weldbasis.project.pinned import rules_for

if TYPE_CHECKING:
    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey

CAUTION = (
    "Decisions support qualified judgement; the contract's code, the qualified procedure and the responsible "
    "welding coordinator (ISO 14731) take precedence. Verify on the job."
)

kb_option = click.option(
    "--kb",
    type=click.Path(path_type=Path, exists=True, file_okay=False),
    default=None,
    help="Rule set to use: a folder with kb.yaml. Without it: the project's house rules, else the published practice.",
)
json_option = click.option("--json", "as_json", is_flag=True, help="Print JSON for a script instead of a table.")


@cache
def terminal() -> Console:
    """The terminal: colours and full width only where a person looks; 80 columns and plain text in a pipe."""
    if sys.stdout.isatty():
        return Console(highlight=False)
    return Console(highlight=False, width=80, color_system=None)


def rules_and_project(
    folder: Path, kb: Path | None, today: datetime.date | None = None, with_cases: bool = False
) -> tuple[Knowledge, Project]:
    """The rules that a project is decided with, and the project. Concessions that ran out before `today` stop it.

    Without `today` the calendar does not count: a record is proved as of its own time.
    """
    knowledge = rules_for(folder, kb, with_cases)
    project = read_project(folder, knowledge)
    if today and (problems := expired(project.concessions, today)):
        raise Refused(problems)
    return knowledge, project


def rules_for_all(folders: Sequence[Path], kb: Path | None) -> list[tuple[Knowledge, list[Path]]]:
    """The sets of rules that projects are decided with, each with its projects; the set of most projects first."""
    today = datetime.date.today()
    found: dict[str, tuple[Knowledge, list[Path]]] = {}
    for folder in folders:
        knowledge, _ = rules_and_project(folder, kb, today, with_cases=True)
        found.setdefault(knowledge.digest, (knowledge, []))[1].append(folder)
    return sorted(found.values(), key=lambda one: -len(one[1]))


def private_key(path: Path) -> Ed25519PrivateKey:
    """The private key in a file, to sign with. Raises Refused where there is none."""
    from weldbasis.load.signature import BadKey, read_private_key  # noqa: PLC0415  (only where something is signed)

    try:
        return read_private_key(path)
    except BadKey as fault:
        do = "make one with: openssl genpkey -algorithm ed25519 -out key.pem"
        raise Refused([Problem(Place(str(path)), str(fault), do=do)]) from fault


def joint_row(project: Project, name: str) -> int:
    """The row of a joint by its name; a click error that offers the nearest name otherwise."""
    from weldbasis.problem import nearest  # noqa: PLC0415  (only for the error)

    names = project.facts.joints
    if name in names:
        return names.index(name)
    lowered = [known.lower() for known in names]
    if name.lower() in lowered:
        return lowered.index(name.lower())
    raise click.BadParameter(f"project {project.id} has no joint {name!r}. {nearest(name, names)}", param_hint="JOINT")


@contextmanager
def progress(title: str, total: int) -> Iterator[Progress]:
    """A progress bar on the error stream, shown only to a person."""
    columns = (TextColumn("{task.description}"), BarColumn(bar_width=30), MofNCompleteColumn())
    console = Console(stderr=True)
    with Progress(*columns, console=console, transient=True, disable=not console.is_terminal) as bar:
        bar.add_task(title, total=total)
        yield bar
