"""Which set of rules a project is decided with: the working state or the release that it pins, of whose rules."""

from __future__ import annotations

from pathlib import Path

from weldbasis.authority.releases import knowledge_of_release
from weldbasis.knowledge import Knowledge
from weldbasis.load.knowledge import load_knowledge
from weldbasis.load.release import read_release, release_names
from weldbasis.load.schema import schema_problems
from weldbasis.load.yaml_text import Document, read_yaml
from weldbasis.places import kb_folder
from weldbasis.problem import Place, Problem, Refused
from weldbasis.project.reading import shown_path


def project_document(path: Path) -> Document:
    """The checked project file of a folder, or the file itself. Raises Refused where it is missing or does not fit."""
    file = path / "project.yaml" if path.is_dir() else path
    if not file.exists():
        why, do = "a project is a folder with a project.yaml", f"make one with: weldbasis start {path}"
        raise Refused([Problem(Place(str(file)), "there is no such file", why, do)])
    document = read_yaml(file, shown_path(file))
    if problems := schema_problems(document, "project"):
        raise Refused(problems)
    return document


def rules_folder(path: Path, document: Document, kb: Path | None) -> Path:
    """The folder of rules a project is decided with: `kb` where one is named, else the project's house rules."""
    if kb is not None:
        return kb
    if "house" not in document.data:
        return kb_folder()
    folder = path if path.is_dir() else path.parent
    house: Path = folder / document.data["house"]
    if not (house / "kb.yaml").is_file():
        what = f"there are no house rules in {document.data['house']!r}"
        why, do = "the folder counts from the project's own and holds a kb.yaml", "name the folder of the house rules"
        raise Refused([document.problem(("house",), what, why, do)])
    return house


def rules_for(path: Path, kb: Path | None = None, with_cases: bool = False) -> Knowledge:
    """The rules that a project is decided with. Raises Refused, also where the release that it pins is missing."""
    document = project_document(path)
    folder, release = rules_folder(path, document, kb), str(document.data["rules"])
    if release != "working" and release not in release_names(folder):
        known = ", ".join(release_names(folder)) or "none"
        what = f"the project is pinned to release {release!r}, which is missing"
        why, do = f"it would lie in {folder / 'releases'}; there are: {known}", "restore it, or pin one that is there"
        raise Refused([document.problem(("rules",), what, why, do)])
    return load_knowledge(folder, with_cases, release)


def rules_named(word: str, folder: Path, with_cases: bool = False) -> Knowledge:
    """A set of rules by a word: `working`, a release of the set in `folder`, a release's file, or another folder.

    Raises Refused where it is none of these, and says what there is.
    """
    path = Path(word)
    if word.endswith(".json") and path.is_file():
        release = read_release(path)
        return knowledge_of_release(release)
    if (path / "kb.yaml").is_file():
        return load_knowledge(path, with_cases)
    return load_knowledge(folder, with_cases, word)
