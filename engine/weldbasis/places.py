"""Where the knowledge base and the site's sources lie: in the checkout, or inside an installed wheel."""

from __future__ import annotations

from pathlib import Path

_PACKAGE = Path(__file__).resolve().parent


def _folder(name: str, mark: str) -> Path:
    for candidate in (_PACKAGE.parents[1] / name, _PACKAGE / name):
        if (candidate / mark).exists():
            return candidate
    raise FileNotFoundError(f"this installation of weldbasis has no {name}/{mark}; install it again")


def kb_folder() -> Path:
    """The published practice that comes with weldbasis."""
    return _folder("kb", "kb.yaml")


def schema_folder() -> Path:
    """The JSON Schemas of every file."""
    return _folder("kb", "schema") / "schema"


def site_folder() -> Path:
    """Pages, templates, assets and example projects."""
    return _folder("site_src", "mkdocs.yml")
