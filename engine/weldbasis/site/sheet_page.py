"""The page of a steel's sheet: its table, and a picture of preheat against thickness, a line for each hydrogen."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from functools import cache
from html import escape
from typing import Any

from markupsafe import Markup

from weldbasis.graph import KnowledgeGraph
from weldbasis.knowledge import Era, Grade, Knowledge, Quantity
from weldbasis.load.yaml_text import read_yaml
from weldbasis.places import site_folder
from weldbasis.site.pictures import svg
from weldbasis.site.render import page
from weldbasis.state import demanding_end
from weldbasis.survey.sheets import BESIDE, PREHEAT, Sheet, Sheets, decide_sheets, reach_text, sheet
from weldbasis.trace import Value
from weldbasis.words import level_titles, number_text

_WIDTH, _HEIGHT, _LEFT, _TOP, _FOOT, _GAP = 760.0, 250.0, 44.0, 26.0, 34.0, 60.0


def sheets_of(knowledge: Knowledge, graph: KnowledgeGraph) -> Sheets:
    """All sheets, worked out under the conditions of sheets.yaml."""
    return decide_sheets(knowledge, graph, conditions())


@cache
def conditions() -> Mapping[str, Any]:
    """The conditions that sheets are worked out for."""
    data: Mapping[str, Any] = read_yaml(site_folder() / "sheets.yaml").data
    return data


def sheet_body(sheets: Sheets, number: int, up: str) -> str:
    """A steel's page; `up` is the address of the page that lists it."""
    knowledge = sheets.evaluation.knowledge
    found = sheet(sheets, number)
    steel = found.steel
    groups: dict[str, int] = {}
    for hydrogen in sheets.conditions["hydrogen"]:
        groups[hydrogen["group"]] = groups.get(hydrogen["group"], 0) + 1
    return page(
        "sheet.html",
        title=title_of(steel),
        steel=steel,
        is_grade=isinstance(steel, Grade),
        up=up,
        reach=reach_text(steel),
        groups=list(groups.items()),
        hydrogen=[h["name"] for h in sheets.conditions["hydrogen"]],
        beside=[knowledge.quantities[name] for name in BESIDE],
        lines=[_line(line, knowledge) for line in found.lines],
        gaps=found.gaps,
        partly=any(v.presence == "maybe" for line in found.lines if line.made for v in line.preheat),
        hot=any(too_hot(v, line.beside[0]) for line in found.lines if line.made for v in line.preheat),
        picture=Markup(preheat_picture(found, sheets.conditions)),
        joint=_joint_words(sheets.conditions, knowledge),
        because=sheets.conditions["because"].strip(),
        release=knowledge.release,
        restraints=len(sheets.conditions["restraint"]),
    )


def title_of(steel: Grade | Era) -> str:
    """What a sheet is called."""
    return steel.designation if isinstance(steel, Grade) else steel.title


def _joint_words(said: Mapping[str, Any], knowledge: Knowledge) -> str:
    words = []
    for name, value in said["joint"].items():
        quantity = knowledge.quantities[name]
        text = level_titles(quantity).get(str(value), str(value)) if quantity.levels else str(value)
        words.append(f"{quantity.title[:1].lower()}{quantity.title[1:]} {text}")
    text = ", ".join(words)
    return f"{text[:1].upper()}{text[1:]}."


def _line(line: Any, knowledge: Knowledge) -> dict[str, Any]:
    quantities = knowledge.quantities
    titles = level_titles(quantities["restraint"])
    return {
        "thickness": f"{line.thickness_mm:g}",
        "restraint": ", ".join(titles.get(level, level) for level in line.restraint),
        "all": len(line.restraint),
        "made": line.made,
        "preheat": [
            Markup(cell_html(value, quantities[PREHEAT]) + ("‡" if too_hot(value, line.beside[0]) else ""))
            for value in line.preheat
        ],
        "beside": [Markup(cell_html(value, quantities[name])) for name, value in zip(BESIDE, line.beside, strict=True)],
    }


def too_hot(preheat: Value, interpass: Value) -> bool:
    """Whether the preheat's demanding end lies above the least interpass limit."""
    return preheat.high is not None and interpass.low is not None and preheat.high > interpass.low


def cell_html(value: Value, quantity: Quantity) -> str:
    """The demanding end and, lighter, the easy end; a dagger where part of the steel's range is not covered."""
    end = demanding_end(value, quantity)
    if end is None:
        return '<span class="wb-uncovered">not covered</span>'
    if isinstance(end, str):
        titles = level_titles(quantity)
        others = [titles.get(level, level) for level in value.any_of if level != end]
        strong, easy = titles.get(end, end), " or ".join(others)
    else:
        assert value.low is not None
        assert value.high is not None
        other = value.low if end == value.high else value.high
        strong, easy = number_text(end, quantity.decimals), number_text(other, quantity.decimals)
        easy = "" if easy == strong else easy
    dagger = "†" if value.presence == "maybe" else ""
    light = f' <span class="wb-easy">{escape(easy)}</span>' if easy else ""
    return f"<b>{escape(strong)}</b>{dagger}{light}"


def preheat_picture(found: Sheet, said: Mapping[str, Any]) -> str:
    """Preheat against thickness under the highest restraint: low hydrogen on the left, the rest on the right."""
    groups = list(dict.fromkeys(h["group"] for h in said["hydrogen"]))
    tops = [v.high for values in found.worst.values() for v in values if v.high is not None]
    top = max([100.0, *tops]) * 1.08
    widest = max(said["thickness_mm"])
    panel = (_WIDTH - _LEFT - _GAP * len(groups)) / len(groups)

    def y(celsius: float) -> float:
        return _HEIGHT - _FOOT - celsius / top * (_HEIGHT - _TOP - _FOOT)

    parts = [_rules(y, top)]
    for place, group in enumerate(groups):
        left = _LEFT + place * (panel + _GAP)

        def x(t_mm: float, left: float = left) -> float:
            return left + t_mm / float(widest) * panel

        parts.append(f'<text class="wb-word" x="{left + 4:.0f}" y="14">{escape(group)}</text>')
        for t_mm in said["thickness_mm"]:
            at = f'x="{x(t_mm):.1f}" y="{_HEIGHT - _FOOT + 14:.0f}"'
            parts.append(f'<text class="wb-tick" {at} text-anchor="middle">{t_mm:g}</text>')
        names = [(number, h["name"]) for number, h in enumerate(said["hydrogen"]) if h["group"] == group]
        ends: list[float] = []
        for rank, (number, name) in enumerate(names):
            runs: list[list[tuple[float, float]]] = [[]]
            for t_mm in said["thickness_mm"]:
                value = found.worst[t_mm][number] if t_mm in found.worst else None
                if value is None or value.high is None:
                    runs.append([])  # a line never runs across what is not covered
                else:
                    runs[-1].append((x(t_mm), y(max(value.high, 0.0))))
            parts.append(_curve([run for run in runs if run], name, rank, ends))
    parts.append(f'<text class="wb-tick" x="{_WIDTH / 2:.0f}" y="{_HEIGHT - 4:.0f}" text-anchor="middle">mm</text>')
    title = f"Preheat of {title_of(found.steel)} against thickness, a line for each hydrogen in mL/100 g"
    return svg(title, "".join(parts), _WIDTH, _HEIGHT)


def _rules(y: Any, top: float) -> str:
    step = 50 if top <= 330 else 100
    parts = []
    for tick in range(0, int(top) + 1, step):
        parts.append(f'<line class="wb-grid" x1="{_LEFT}" x2="{_WIDTH - 20}" y1="{y(tick):.1f}" y2="{y(tick):.1f}"/>')
        parts.append(f'<text class="wb-tick" x="{_LEFT - 6}" y="{y(tick) + 4:.1f}" text-anchor="end">{tick}</text>')
    return "".join([*parts, f'<text class="wb-tick" x="{_LEFT - 6}" y="12" text-anchor="end">°C</text>'])


def _curve(runs: Sequence[Sequence[tuple[float, float]]], name: str, rank: int, ends: list[float]) -> str:
    """Lines with marks, told apart by dashes and by a name at the end, which steps aside for those before it."""
    if not runs:
        return ""
    parts = []
    for run in runs:
        path = " ".join(f"{px:.1f},{py:.1f}" for px, py in run)
        parts.append(f'<polyline class="wb-line wb-dash-{rank}" points="{path}"/>')
        parts += [f'<circle class="wb-dot" cx="{px:.1f}" cy="{py:.1f}" r="2.2"/>' for px, py in run]
    last = runs[-1][-1]
    at = last[1] + 4
    while any(abs(at - taken) < 11 for taken in ends):
        at -= 11
    ends.append(at)
    parts.append(f'<text class="wb-tick" x="{last[0] + 7:.1f}" y="{at:.1f}">HD {escape(name)}</text>')
    return "".join(parts)
