"""The page "Methods against each other": preheat methods over a lattice of real steels, worked out at publishing."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from markupsafe import Markup

from weldbasis.load.yaml_text import read_yaml
from weldbasis.places import site_folder
from weldbasis.ranges import parse_range
from weldbasis.site.content import Content
from weldbasis.site.method_curves import Curve, Point, method_curves
from weldbasis.site.render import page
from weldbasis.survey.agreement import (
    Lattice,
    LimitLeft,
    Pair,
    Plan,
    compare,
    effect,
    limits_left,
    rests_on,
    share_inside,
    spreads,
    walk_lattice,
    widest,
)
from weldbasis.values import Numbers
from weldbasis.words import number_text, unit_text

_AXES = ("hydrogen", "heat_input", "restraint")
_MEASURES = ("cet", "pcm", "cen", "seferian_carbon", "prequalified_category")
_PRINTED = "preheat-prequalified"
_FIRST_LIMITS = 3
# A butt joint leads heat away through both plates, so its combined thickness is twice the plate's.
_BUTT_PATHS = 2


@dataclass(frozen=True)
class MethodRow:
    """A method in the table of methods: what it rests on, how often it gives a value, which limits are left."""

    title: str
    address: str
    measure: str
    hydrogen: str
    inside: float
    highest: float
    effects: Mapping[str, str]
    limits: tuple[str, ...]


@dataclass(frozen=True)
class SteelRow:
    """A steel: the analysis it is taken with, and how far apart its methods lie."""

    designation: str
    figures: Mapping[str, str]
    joints: int
    agree: float
    middle: float
    where: str


def methods_body(content: Content) -> str:
    """The page's body."""
    data: Mapping[str, Any] = read_yaml(site_folder() / "measured" / "methods.yaml", "methods.yaml").data
    lattice = walk_lattice(plan_of(data), content.knowledge, content.graph)
    names = [str(method["short"]) for method in data["methods"]]
    pairs = {
        (first, second): compare(lattice, first, second)
        for first in range(len(names))
        for second in range(first + 1, len(names))
    }
    return page(
        "methods.html",
        names=names,
        own_shares=_own_shares(content, lattice.plan),
        plan=lattice.plan,
        data=data,
        count=len(lattice.evaluation.facts.joints),
        methods=[_method(content, lattice, number) for number in range(len(names))],
        pairs=[[_pair(pairs, row, column) for column in range(len(names))] for row in range(len(names))],
        closest=_by_agreement(pairs, names),
        steels=[_steel(content, lattice, number, names) for number in range(len(lattice.plan.steels))],
        pictures=[
            _picture(content, lattice, data, number, names)
            for number, steel in enumerate(data["steels"])
            if steel.get("drawn")
        ],
    )


def plan_of(data: Mapping[str, Any]) -> Plan:
    """The plan as its file says it."""
    steels = {
        steel["grade"]: {"prequalified_category": steel["category"]} if "category" in steel else {}
        for steel in data["steels"]
    }
    analysis = data["analysis"]
    return Plan(
        steels,
        analysis["shares"],
        {steel["grade"]: steel["shares"] for steel in data["steels"] if "shares" in steel},
        float(analysis["residual_share"]),
        data["joint"],
        tuple(float(thickness) for thickness in data["thickness"]),
        {axis: tuple(data[axis]) for axis in _AXES},
        tuple(method["quantity"] for method in data["methods"]),
        float(data["agree_within"]),
    )


def _own_shares(content: Content, plan: Plan) -> list[tuple[str, str, float]]:
    """Steel, element and share, wherever a steel has a share of its own."""
    grades = content.knowledge.grades
    return [
        (grades[name].designation, element, share)
        for name, shares in plan.own_shares.items()
        for element, share in shares.items()
    ]


def _method(content: Content, lattice: Lattice, number: int) -> MethodRow:
    quantities, graph = content.knowledge.quantities, content.graph
    method = lattice.plan.methods[number]
    rule = content.knowledge.rules[graph.giving[method]]
    measures = [quantities[name].title for name in rests_on(graph, method, _MEASURES)]
    scale = rests_on(graph, method, ("hydrogen_jis", "hydrogen"))
    hydrogen = "glycerin" if "hydrogen_jis" in scale else "ISO 3690" if scale else "none"
    values = lattice.flat(number)
    effects = {axis: _effect(lattice, number, axis) for axis in ("thickness", *_AXES)}
    limits = tuple(_limit(left) for left in limits_left(lattice, graph, method)[:_FIRST_LIMITS])
    highest = float(np.nanmax(values))
    measure = ", ".join(measures)
    inside = share_inside(lattice, number)
    return MethodRow(rule.title, f"../rules/{rule.id}.html", measure, hydrogen, inside, highest, effects, limits)


def _effect(lattice: Lattice, number: int, axis: str) -> str:
    mean = effect(lattice, number, axis).mean
    if mean is None:
        return "outside"
    rounded = round(mean)
    return f"{rounded:+d}".replace("-", "−") if rounded else "0"


def _limit(left: LimitLeft) -> str:
    limit = f"outside {left.limit}" if left.quantity.is_number else f"other than {left.limit}"
    return (
        f"{left.quantity.title.lower()} {limit} {unit_text(left.quantity.unit)}".rstrip()
        + f": {100 * left.share:.0f} %"
    )


def _pair(pairs: Mapping[tuple[int, int], Pair | None], row: int, column: int) -> dict[str, Any] | None:
    """A cell of the table of pairs; under the diagonal it is the pair above, read the other way round."""
    if row == column:
        return None
    pair = pairs[min(row, column), max(row, column)]
    if pair is None:
        return {"agree": None}
    sign = 1 if row < column else -1
    return {"agree": pair.agree, "middle": sign * pair.middle, "joints": pair.joints}


def _by_agreement(pairs: Mapping[tuple[int, int], Pair | None], names: Sequence[str]) -> list[dict[str, Any]]:
    some = [(names[one], names[other], pair) for (one, other), pair in pairs.items() if pair]
    some.sort(key=lambda entry: (-entry[2].agree, entry[0], entry[1]))
    return [{"first": first, "second": second, "pair": pair} for first, second, pair in some]


def _steel(content: Content, lattice: Lattice, number: int, names: Sequence[str]) -> SteelRow:
    grade = content.knowledge.grades[list(lattice.plan.steels)[number]]
    apart = spreads(lattice, number)
    agree = float((apart <= lattice.plan.agree_within_k).mean()) if len(apart) else 0.0
    middle = float(np.median(apart)) if len(apart) else 0.0
    figures = _analysis(content, lattice, grade.id)
    return SteelRow(grade.designation, figures, len(apart), agree, middle, _where(lattice, number, names))


def _analysis(content: Content, lattice: Lattice, grade: str) -> dict[str, str]:
    """Carbon, manganese and the carbon equivalents of the steel's first joint, as they enter the comparison."""
    evaluation = lattice.evaluation
    row = next(row for row, joint in enumerate(evaluation.facts.joints) if joint.split(" ")[0] == grade)
    member = int(evaluation.views["member"].starts[row])
    found = {}
    for name in ("carbon", "manganese", "ce_iiw", "cet", "pcm"):
        column, quantity = evaluation.columns[name], content.knowledge.quantities[name]
        assert isinstance(column, Numbers)
        found[name] = number_text(float(column.high[member]), min(quantity.decimals, 2))
    return found


def _where(lattice: Lattice, number: int, names: Sequence[str]) -> str:
    found = widest(lattice, number)
    if found is None:
        return ""
    apart, high, low, place = found
    axes = [levels[index] for levels, index in zip(lattice.plan.axes.values(), place[1:], strict=True)]
    at = f"{lattice.plan.thickness_mm[place[0]]:g} mm, {axes[0]:g} mL/100 g, {axes[1]:g} kJ/mm, {axes[2]} restraint"
    return f"{apart:.0f} °C, {names[high]} above {names[low]}, at {at}"


def _picture(
    content: Content, lattice: Lattice, data: Mapping[str, Any], number: int, names: Sequence[str]
) -> dict[str, Any]:
    plan, steel = lattice.plan, data["steels"][number]
    grade = content.knowledge.grades[steel["grade"]]
    at = tuple(plan.axes[axis].index(data["drawn_at"][axis]) for axis in _AXES)
    curves = [
        Curve(name, style, lattice.values[style, number, :, at[0], at[1], at[2]]) for style, name in enumerate(names)
    ]
    points = printed_points(content, steel.get("category", ""))
    free = _free_thickness(lattice, number, at)
    told = data["drawn_at"]
    title = (
        f"{grade.designation}: preheat against thickness at {told['hydrogen']:g} mL/100 g, "
        f"{told['heat_input']:g} kJ/mm, {told['restraint']} restraint"
    )
    shown = [curve for curve in curves if np.isfinite(curve.celsius).any()]
    beyond = [curve.name for curve in shown if np.nanmax(curve.celsius) > data["drawn_up_to"]]
    svg = method_curves(title, plan.thickness_mm, curves, points, free, float(data["drawn_up_to"]))
    rows = [
        (thickness, [float(curve.celsius[place]) for curve in shown])
        for place, thickness in enumerate(plan.thickness_mm)
    ]
    return {
        "title": title,
        "svg": Markup(svg),  # built from escaped words and numbers only
        "names": [curve.name for curve in shown],
        "rows": rows,
        "beyond": beyond,
    }


def printed_points(content: Content, category: str) -> list[Point]:
    """What the prequalified table prints for a category, from the cases that were read in their source."""
    found = []
    for case in content.knowledge.cases:
        if case.rule != _PRINTED or case.nature not in ("table", "published") or not category:
            continue
        if case.given.get("prequalified_category") == category and isinstance(case.given["thickness"], int | float):
            preheat = parse_range(str(case.expect["preheat_prequalified"])).low
            source = content.knowledge.sources[case.source].title.split(":")[0]
            found.append(Point(float(case.given["thickness"]), preheat, source))
    return sorted(set(found), key=lambda point: (point.thickness_mm, point.celsius))


def _free_thickness(lattice: Lattice, number: int, at: tuple[int, ...]) -> float | None:
    """The plate thickness, mm, that the printed table of method A lets go without preheat for the drawn joint."""
    plan, evaluation = lattice.plan, lattice.evaluation
    grade = list(plan.steels)[number]
    shape = [len(levels) for levels in plan.axes.values()]
    setting = int(np.ravel_multi_index(at, shape)) + 1
    column = evaluation.columns["no_preheat_combined_thickness"]
    assert isinstance(column, Numbers)
    for row, joint in enumerate(evaluation.facts.joints):
        if joint.split(" ")[0] == grade and joint.endswith(f" {setting}") and np.isfinite(column.low[row]):
            return float(column.low[row]) / _BUTT_PATHS
    return None
