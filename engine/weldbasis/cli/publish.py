"""`weldbasis publish`: the static site of one or more projects."""

from __future__ import annotations

from pathlib import Path

import click

from weldbasis.cli.console import kb_option, progress, rules_for_all
from weldbasis.places import site_folder
from weldbasis.site.publish import publish
from weldbasis.words import counted


@click.command("publish")
@click.argument("projects", nargs=-1, type=click.Path(path_type=Path, exists=True))
@click.option(
    "--to",
    "folder",
    type=click.Path(path_type=Path, file_okay=False),
    default=Path("published"),
    show_default=True,
    help="Folder of the site. It is built beside its place first, then swapped in.",
)
@kb_option
def command(projects: tuple[Path, ...], folder: Path, kb: Path | None) -> None:
    """Publish PROJECTS as a site that opens from a folder or a USB stick, with no network.

    Without PROJECTS the example projects that come with weldbasis are published. Every joint gets a page
    that says what was decided and why; rules, sources and steels get theirs. A folder that weldbasis did not
    make is never replaced.
    """
    chosen = projects or tuple(sorted(p.parent for p in (site_folder() / "projects").glob("*/project.yaml")))
    (knowledge, first), *others = rules_for_all(chosen, kb)
    with progress("publishing", 100) as bar:
        task = bar.task_ids[0]
        made = publish(
            first, folder, knowledge, lambda done, total: bar.update(task, completed=done, total=total), others
        )
    home = (made.folder / "index.html").resolve()
    click.echo(f"Published {counted(len(chosen), 'project')}, {counted(made.joints, 'joint')}, {made.pages} pages.")
    click.echo(f"Open {home.as_uri()} in any browser; no network is needed.")
