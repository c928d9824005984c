"""`weldbasis start`: a new project folder, with comments that teach."""

from __future__ import annotations

import re
from pathlib import Path

import click

from weldbasis.places import site_folder
from weldbasis.problem import Place, Problem, Refused
from weldbasis.record import write_aside


@click.command("start")
@click.argument("folder", type=click.Path(path_type=Path))
@click.option("--title", default=None, help="The project's title as pages show it.")
def command(folder: Path, title: str | None) -> None:
    """Make a new project in FOLDER: a project.yaml to fill in, a weld list and a certificate list.

    The files hold one small joint that can be decided at once, and comments that say what every entry
    means. Nothing that exists is overwritten.
    """
    templates = site_folder() / "start"
    project_id = re.sub(r"[^a-z0-9]+", "-", folder.resolve().name.lower()).strip("-") or "project"
    files = sorted(path for path in templates.iterdir() if path.is_file())
    if clash := [folder / path.name for path in files if (folder / path.name).exists()]:
        raise Refused(
            [
                Problem(
                    Place(str(path)),
                    "this file exists already",
                    "start never overwrites a file",
                    "choose another folder, or move the file away",
                )
                for path in clash
            ]
        )
    for path in files:
        text = path.read_text(encoding="utf-8")
        text = text.replace("@id@", project_id).replace("@title@", title or project_id.replace("-", " ").capitalize())
        write_aside(folder / path.name, text.encode("utf-8"))
    click.echo(f"Made {', '.join(path.name for path in files)} in {folder}.")
    click.echo(f"Next: weldbasis decide {folder}")
