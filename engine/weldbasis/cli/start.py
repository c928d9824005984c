"""`weldbasis start`: a new folder of a project or of house rules, with comments that teach."""

from __future__ import annotations

import re
from pathlib import Path

import click

from weldbasis.places import site_folder
from weldbasis.problem import Place, Problem, Refused
from weldbasis.record import write_aside


@click.command("start")
@click.argument("folder", type=click.Path(path_type=Path))
@click.option("--title", default=None, help="The title as pages show it.")
@click.option("--house", is_flag=True, help="A folder of house rules that stand on the published practice.")
def command(folder: Path, title: str | None, house: bool) -> None:
    """Make a new project in FOLDER: a project.yaml to fill in. With --house: a folder of house rules.

    The files can be decided, or vetted, at once, and their comments say what every entry means. Nothing that
    exists is overwritten.
    """
    templates = site_folder() / ("start-house" if house else "start")
    name = re.sub(r"[^a-z0-9]+", "-", folder.resolve().name.lower()).strip("-") or ("house" if house else "project")
    files = sorted(path for path in templates.rglob("*") if path.is_file())
    targets = {path: folder / path.relative_to(templates) for path in files}
    if clash := [target for target in targets.values() if target.exists()]:
        why, do = "start never overwrites a file", "choose another folder, or move the file away"
        raise Refused([Problem(Place(str(path)), "this file exists already", why, do) for path in clash])
    for path, target in targets.items():
        text = path.read_text(encoding="utf-8")
        text = text.replace("@id@", name).replace("@title@", title or name.replace("-", " ").capitalize())
        write_aside(target, text.encode("utf-8"))
    made = ", ".join(target.relative_to(folder).as_posix() for target in targets.values())
    click.echo(f"Made {made} in {folder}.")
    click.echo(f"Next: weldbasis {'vet' if house else 'decide'} {folder}")
