"""Releases of a set of rules: frozen with digest and signature, one after another, and what each of them changes."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import pairwise
from pathlib import Path
from typing import Any

from weldbasis import __version__
from weldbasis.authority.changes import Difference, differences_between
from weldbasis.knowledge import Knowledge, Rule
from weldbasis.load.knowledge import knowledge_of
from weldbasis.load.layer import Layer, Layers
from weldbasis.load.release import FORMAT, Release, read_release, release_digest, release_names, release_path
from weldbasis.load.signature import sign
from weldbasis.problem import Place, Problem, Refused


def release_data(stack: Layers, name: str, date: str, last: Release | None, key: Any = None) -> dict[str, Any]:
    """A release of the stacked layers as data, sealed by its digest and signed where a private key is given.

    Cases are left out: they prove the rules, and decide nothing.
    """
    data: dict[str, Any] = {
        "format": FORMAT,
        "release": name,
        "date": date,
        "engine": __version__,
        "follows": {"release": last.name, "digest": last.digest} if last else None,
        "layers": [_layer_data(layer) for layer in stack.layers],
    }
    data["digest"] = release_digest(data)
    return {**data, "signature": sign(data["digest"], key)} if key is not None else data


def _layer_data(layer: Layer) -> dict[str, Any]:
    files = {path: document.data for path, document in layer.files.items() if not path.startswith("cases/")}
    return {"name": layer.name, "head": dict(layer.head), "files": files}


def releases_of(folder: Path) -> tuple[Release, ...]:
    """All releases of the set in a folder, the first one first. Raises Refused where one is broken or has no place."""
    found = {name: read_release(release_path(folder, name), name) for name in release_names(folder)}
    ordered: list[Release] = []
    follows = ""
    while len(ordered) < len(found):
        following = [release for release in found.values() if release.follows == follows]
        if len(following) != 1:
            raise Refused([_torn(folder, follows, following)])
        ordered.append(following[0])
        follows = following[0].name
    for before, after in pairwise(ordered):
        if after.data["follows"]["digest"] != before.digest:
            what = f"release {after.name!r} follows another {before.name!r} than the one that lies here"
            place = Place(str(release_path(folder, after.name)))
            raise Refused([Problem(place, what, "releases are never edited", f"restore {before.name} as it was")])
    return tuple(ordered)


def _torn(folder: Path, follows: str, following: list[Release]) -> Problem:
    after = f"after {follows!r}" if follows else "as the first"
    what = f"{len(following)} releases stand {after}; exactly one can"
    names = ", ".join(release.name for release in following)
    do = f"keep one of {names}" if names else "put back the release that is missing in between"
    return Problem(Place(str(folder / "releases")), what, "releases follow each other in one line", do)


def version_problems(now: Knowledge, releases: tuple[Release, ...]) -> Iterator[Problem]:
    """Rules whose meaning moved since the last release under the same version, and ids used a second time."""
    if not releases:
        return
    last = knowledge_of_release(releases[-1])
    ever = {name for release in releases[:-1] for name in knowledge_of_release(release).rules}
    for difference in differences_between(last, now):
        if difference.of != "rule" or difference.how == "withdrawn":
            continue
        rule = now.rules[difference.id]
        if difference.how == "changed":
            yield from _same_version(rule, last.rules[rule.id], difference, releases[-1].name)
        elif rule.id in ever:
            what = f"rule id {rule.id!r} was used before release {releases[-1].name} for a rule that was withdrawn"
            yield Problem(rule.place, what, "ids live for ever, and records name them", "give the new rule a new id")


def _same_version(rule: Rule, old: Rule, difference: Difference, release: str) -> Iterator[Problem]:
    place = rule.place_of("version")
    if difference.results and rule.version <= old.version:
        what = f"rule {rule.id} asks for something else than in release {release}, and is still version {rule.version}"
        why = "; ".join(difference.parts[:3])
        do = f"write version: {old.version + 1}, and say under changes what and why"
        yield Problem(place, what, why, do)


def knowledge_of_release(release: Release) -> Knowledge:
    """A release as a set of rules."""
    return knowledge_of(Layers(release.layers, release.name, release.digest))


def news(title: str, releases: tuple[Release, ...]) -> str:
    """What every release changes, the newest first, as Markdown: first what moves results, then what does not."""
    sets = [(release, knowledge_of_release(release)) for release in releases]
    parts = [f"# {title}: what each release changes\n\nWritten by `weldbasis freeze`; never edited by hand.\n"]
    for number in range(len(sets) - 1, -1, -1):
        release, now = sets[number]
        parts.append(f"\n## {release.name} ({release.data['date']})\n\nDigest {release.digest}.\n")
        if number == 0:
            amended = "".join(_amendments(now))
            count = f"{len(now.rules)} rules, {len(now.grades)} grades, {len(now.eras)} envelopes of unknown steel"
            parts.append(f"\nThe first release: {count}.\n" + (f"\n{amended}" if amended else ""))
        else:
            parts += _release_news(differences_between(sets[number - 1][1], now))
    return "".join(parts)


def _amendments(knowledge: Knowledge) -> Iterator[str]:
    for amendment in knowledge.amendments:
        by = f" Justified by {amendment.justified_by}." if amendment.justified_by else ""
        yield f"- {amendment.of} `{amendment.id}`, {amendment.how}: {amendment.why}{by} ({amendment.approved_by})\n"


def _release_news(found: tuple[Difference, ...]) -> Iterator[str]:
    for head, results in (("Changes results", True), ("Does not change results", False)):
        chosen = [difference for difference in found if difference.results is results]
        yield f"\n### {head}\n\n" + ("".join(map(_line, chosen)) if chosen else "Nothing.\n")


def _line(difference: Difference) -> str:
    reasons = [f"version {c.version}: {c.what} {c.why} ({c.approved_by})" for c in difference.why]
    if difference.amendment and not reasons:
        reasons = [f"{difference.amendment.why} ({difference.amendment.approved_by})"]
    shown = [*difference.parts[:5], *(["…"] if len(difference.parts) > 5 else [])]
    details = "".join(f"    - {text}\n" for text in [*reasons, *shown])
    return f"- {difference.of} `{difference.id}` {difference.how}\n{details}"
