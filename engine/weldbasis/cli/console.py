"""What the commands share: the terminal, loading knowledge and projects, the caution under every table."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from contextlib import contextmanager
from functools import cache
from pathlib import Path

import click
from rich.console import Console
from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn

from weldbasis.knowledge import Knowledge
from weldbasis.load.knowledge import load_knowledge
from weldbasis.places import kb_folder
from weldbasis.project import Project, read_project

CAUTION = (
    "Decisions support qualified judgement; the contract's code, the qualified procedure and the responsible "
    "welding coordinator (ISO 14731) take precedence. Verify on the job."
)

kb_option = click.option(
    "--kb",
    type=click.Path(path_type=Path, exists=True, file_okay=False),
    default=None,
    help="Rule set to use: a folder with kb.yaml. Without it, the published practice that comes with weldbasis.",
)
json_option = click.option("--json", "as_json", is_flag=True, help="Print JSON for a script instead of a table.")


@cache
def terminal() -> Console:
    """The terminal: colours and full width only where a person looks; 80 columns and plain text in a pipe."""
    if sys.stdout.isatty():
        return Console(highlight=False)
    return Console(highlight=False, width=80, color_system=None)


def knowledge_from(folder: Path | None, with_cases: bool = False) -> Knowledge:
    """The rule set a command works with; cases only where pages show them."""
    return load_knowledge(folder or kb_folder(), with_cases)


def project_from(folder: Path, knowledge: Knowledge) -> Project:
    """The project a command works on."""
    return read_project(folder, knowledge)


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
