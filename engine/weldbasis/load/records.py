"""Checked documents into frozen records: one function a kind of record. Shapes are sure here, names are not."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping
from typing import Any

from weldbasis.knowledge import (
    AmendedKind,
    Amendment,
    Case,
    Change,
    Cite,
    Consumable,
    Era,
    Grade,
    GradeBand,
    Level,
    Lever,
    Limits,
    Quantity,
    Read,
    Rule,
    Sampling,
    Source,
)
from weldbasis.load.yaml_text import Document, Path_
from weldbasis.problem import nearest
from weldbasis.ranges import Range, parse_range

_RULE_PARTS = frozenset(
    {
        "id",
        "version",
        "title",
        "kind",
        "for_each",
        "gives",
        "gives_unit",
        "reads",
        "applies_when",
        "valid_within",
        "direction",
        "say",
        "cites",
        "note",
        "changes",
    }
)


_AMENDED: tuple[AmendedKind, ...] = ("rule", "quantity", "grade", "era", "consumable")


class BadRange(ValueError):
    """A text that should be a range, or a level, and is none, with its path in the document."""

    def __init__(self, path: Path_, message: str) -> None:
        super().__init__(message)
        self.path = path


def range_at(value: Any, path: Path_) -> Range:
    """A range, or BadRange with where it stands."""
    try:
        return parse_range(value)
    except ValueError as fault:
        raise BadRange(path, str(fault)) from fault


def quantity_from(data: Mapping[str, Any], document: Document, path: Path_, topic: str) -> Quantity:
    """A quantity of the vocabulary."""
    number, levels = data.get("number", {}), data.get("levels", {})
    titles = levels.get("titles", {})
    about = number or levels
    for name in titles:
        if name not in levels["order"]:
            fault = f"{name!r} is no level of {data['id']}. {nearest(name, levels['order'])}"
            raise BadRange((*path, "levels", "titles", name), fault)
    return Quantity(
        id=data["id"],
        title=data["title"],
        of=data["of"],
        says=data["says"],
        symbol=data.get("symbol", ""),
        unit=number.get("unit", ""),
        range=range_at(number["range"], (*path, "number", "range")) if number else Range(0.0, 0.0),
        decimals=number.get("decimals", 0),
        levels=tuple(Level(name, titles.get(name, name.replace("-", " "))) for name in levels.get("order", ())),
        worse=about.get("worse", "neither"),
        given=data.get("given", "never"),
        if_not_given=data.get("if_not_given", "absent"),
        if_not_given_because=data.get("because", ""),
        decision=data.get("decision", 0),
        part_of=data.get("part_of", ""),
        read_to=float(data.get("read_to", 0.0)),
        lever=_lever_from(data["lever"], (*path, "lever")) if "lever" in data else None,
        topic=topic,
        place=document.place(*path, "id"),
    )


def _lever_from(data: Mapping[str, Any], path: Path_) -> Lever:
    return Lever(
        data["how"],
        range_at(data["within"], (*path, "within")) if "within" in data else Range(0.0, 0.0),
        float(data.get("step", 0.0)),
        {name: float(value) for name, value in data.get("settings", {}).items()},
        tuple(float(value) for value in data.get("table", ())),
        data.get("only") == "new-parts",
    )


def cites_from(data: Mapping[str, Any], default: tuple[Cite, ...] = ()) -> tuple[Cite, ...]:
    """The sources a record cites, or those of its file."""
    found = tuple(
        Cite(c["source"], c["at"], c["checked"], c.get("covers", ""), c.get("holds_to", ""), c.get("beyond", {}))
        for c in data.get("cites", ())
    )
    return found or default


def rule_from(data: Mapping[str, Any], document: Document, path: Path_, topic: str, layer: str) -> Rule:
    """A rule; everything that is not common to all kinds is its body.

    Keys stand in the order of the alphabet, as in a release, so that both give the same traces.
    """
    data = _in_order(data)
    gives = data.get("gives", ())
    places = {place[len(path) :]: at for place, at in document.places.items() if place[: len(path)] == path}
    return Rule(
        id=data["id"],
        version=data["version"],
        title=data["title"],
        kind=data["kind"],
        for_each=data["for_each"],
        gives=(gives,) if isinstance(gives, str) else tuple(gives),
        gives_unit=data.get("gives_unit", ""),
        reads=tuple(reads_from(data.get("reads", ()))),
        body={key: value for key, value in data.items() if key not in _RULE_PARTS},
        say=data["say"],
        cites=cites_from(data),
        changes=tuple(Change(c["version"], c["date"], c["what"], c["why"], c["approved_by"]) for c in data["changes"]),
        applies_when=data.get("applies_when", {}),
        valid_within=data.get("valid_within", {}),
        direction=data.get("direction", {}),
        note=data.get("note", ""),
        topic=topic,
        layer=layer,
        place=document.place(*path, "id"),
        places=places,
    )


def _in_order(data: Any) -> Any:
    if isinstance(data, Mapping):
        return {key: _in_order(data[key]) for key in sorted(data)}
    return [_in_order(item) for item in data] if isinstance(data, list) else data


def reads_from(written: Any) -> Iterator[Read]:
    """The names a body uses, from any of the three ways to write them."""
    if isinstance(written, list | tuple):
        yield from (Read(name, name) for name in written)
        return
    for name, bound in written.items():
        if isinstance(bound, str):
            yield Read(name, bound)
        else:
            yield Read(name, bound["quantity"], bound.get("unit", ""))


def source_from(data: Mapping[str, Any], document: Document, path: Path_) -> Source:
    """A source."""
    return Source(
        data["id"],
        data["title"],
        data["kind"],
        data.get("edition", ""),
        data.get("year", 0),
        data["how_checked"],
        data.get("note", ""),
        tuple(limits_from(data.get("limits", ()), document, path)),
        document.place(*path, "id"),
    )


def limits_from(written: Iterable[Mapping[str, Any]], document: Document, path: Path_) -> Iterator[Limits]:
    """The limits that a source states."""
    for place, data in enumerate(written):
        here = (*path, "limits", place, "within")
        yield Limits(
            data["id"],
            data["at"],
            data["checked"],
            ranges_from(data["within"], here),
            data.get("note", ""),
            document.place(*path, "limits", place, "id"),
            {name: document.place(*here, name) for name in data["within"]},
        )


def ranges_from(data: Mapping[str, Any], path: Path_) -> dict[str, Range]:
    """Ranges by name: an element symbol, or a quantity id."""
    return {name: range_at(value, (*path, name)) for name, value in data.items()}


def grade_from(data: Mapping[str, Any], document: Document, path: Path_) -> Grade:
    """A steel grade; standard and sources of the file stand where it names none."""
    top = document.data
    bands = tuple(
        GradeBand(
            thickness=range_at(band["thickness"], (*path, "bands", place, "thickness")),
            composition=ranges_from(band["composition"], (*path, "bands", place, "composition")),
            ce_iiw_max=band.get("ce_iiw_max"),
            pcm_max=band.get("pcm_max"),
            cet_max=band.get("cet_max"),
            yield_min=band.get("yield_min"),
            tensile=range_at(band["tensile"], (*path, "bands", place, "tensile")) if "tensile" in band else None,
        )
        for place, band in enumerate(data["bands"])
    )
    return Grade(
        id=data["id"],
        designation=data["designation"],
        standard=data.get("standard", top.get("standard", "")),
        family=data["family"],
        delivery=tuple(data.get("delivery", ())),
        group=data.get("group", ""),
        bands=bands,
        product=data.get("product", ""),
        number=data.get("number", ""),
        p_number=data.get("p_number", ""),
        aliases=tuple(data.get("aliases", ())),
        checked=data["checked"],
        cites=cites_from(data, cites_from(top)),
        note=data.get("note", ""),
        place=document.place(*path, "id"),
    )


def era_from(data: Mapping[str, Any], document: Document, path: Path_) -> Era:
    """An envelope of undocumented steel."""
    return Era(
        id=data["id"],
        title=data["title"],
        years=data["years"],
        region=data["region"],
        family=data["family"],
        typical=ranges_from(data["typical"], (*path, "typical")),
        ceilings={name: float(value) for name, value in data["ceilings"].items()},
        checked=data["checked"],
        cites=cites_from(data, cites_from(document.data)),
        note=data.get("note", ""),
        place=document.place(*path, "id"),
    )


def sampling_from(data: Mapping[str, Any], document: Document, path: Path_) -> Sampling:
    """The method that makes sets of samples."""
    factors = tuple((entry["n"], float(entry["k"])) for entry in data["factors"])
    critical = tuple((entry["n"], float(entry["g"])) for entry in data["outlier"]["values"])
    for part, found in ((("factors",), factors), (("outlier", "values"), critical)):
        if list(found) != sorted(found) or len({n for n, _ in found}) < len(found):
            raise BadRange((*path, *part), "the counts n must rise")
    if factors[0][0] > data["enough"]:
        raise BadRange((*path, "factors"), f"no factor for {data['enough']} values, which are enough")
    return Sampling(
        id=data["id"],
        enough=data["enough"],
        content=data["content"],
        confidence=data["confidence"],
        factors=factors,
        significance=data["outlier"]["significance"],
        critical_values=critical,
        last_figures={name: float(value) for name, value in data["last_figures"].items()},
        centre=tuple(data["centre"]["elements"]),
        centre_factor=float(data["centre"]["factor"]),
        cites=cites_from(data),
        note=data.get("note", ""),
        place=document.place(*path, "id"),
    )


def consumable_from(data: Mapping[str, Any], document: Document, path: Path_) -> Consumable:
    """A consumable classification."""
    return Consumable(
        id=data["id"],
        standard=data["standard"],
        process=data["process"],
        covering=data["covering"],
        hydrogen_max=data.get("hydrogen_max"),
        yield_min=data.get("yield_min"),
        tensile=range_at(data["tensile"], (*path, "tensile")) if "tensile" in data else None,
        composition=ranges_from(data.get("composition", {}), (*path, "composition")),
        checked=data["checked"],
        cites=cites_from(data),
        note=data.get("note", ""),
        place=document.place(*path, "id"),
    )


def case_from(data: Mapping[str, Any], document: Document, path: Path_) -> Case:
    """A worked example."""
    return Case(
        id=data["id"],
        rule=data["rule"],
        given=data["given"],
        expect=data["expect"],
        nature=data["nature"],
        source=data["source"],
        at=data["at"],
        tolerance=data.get("tolerance", 0.0),
        arithmetic=data.get("arithmetic", ""),
        note=data.get("note", ""),
        place=document.place(*path, "id"),
    )


def amendments_from(document: Document, layer: str) -> Iterator[Amendment]:
    """What a layer changes in those beneath it."""
    for number, data in enumerate(document.data["amendments"]):
        kind = next(key for key in _AMENDED if key in data)
        yield Amendment(
            of=kind,
            id=data[kind],
            how=data["how"],
            why=data["why"],
            approved_by=data["approved_by"],
            justified_by=data.get("justified_by", ""),
            layer=layer,
            place=document.place("amendments", number, kind),
        )


Maker = Callable[[Mapping[str, Any], Document, Path_], Any]
