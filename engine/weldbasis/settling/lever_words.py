"""Short texts of levers, shared by terminal and site: settings, changes, places on a bar, what stands on the edge."""

from __future__ import annotations

import math

from weldbasis.evaluate import Evaluation
from weldbasis.knowledge import Quantity
from weldbasis.sentences import outcome_text
from weldbasis.settling.edges import Edge
from weldbasis.settling.levers import Change, Hold, Margin
from weldbasis.settling.trials import member_rows
from weldbasis.words import level_titles, number_text, with_unit


def hold_text(evaluation: Evaluation, hold: Hold) -> str:
    """A lever by name, with the part where it is of one: "Thickness of the part, plate-a"."""
    name = evaluation.facts.members[hold.rows[0]] if hold.ref.member else ""
    return f"{hold.quantity.title}{f', {name}' if name else ''}"


def setting_text(quantity: Quantity, setting: float | str) -> str:
    """A setting in words: "1.35 kJ/mm", "H3", "medium"."""
    if isinstance(setting, str):
        return level_titles(quantity).get(setting, setting)
    return with_unit(number_text(setting, quantity.decimals), quantity.unit)


def change_text(evaluation: Evaluation, hold: Hold, change: Change) -> str:
    """Where a decision changes and to what: "from 1.35 kJ/mm: minimum preheat 50 °C"."""
    decision = evaluation.knowledge.quantities[change.decision]
    setting = setting_text(hold.quantity, change.setting)
    if not isinstance(change.setting, str):
        up = hold.now.low is not None and change.setting > hold.now.low
        setting = f"{'from' if up else 'down to'} {setting}"
    return f"{setting}: {decision.title.lower()} {outcome_text(decision, change.becomes)}"


def bar_places(margin: Margin) -> tuple[float, float, float]:
    """Where on a bar, from 0 to 1, the part without change begins, where the lever stands, and where that part ends.

    The bar runs over all that the shop can set, by ratios.
    """
    lever = margin.hold.quantity.lever
    assert lever is not None
    assert margin.low is not None
    assert margin.start is not None
    assert margin.high is not None
    bottom, top = min(lever.within.low, margin.low), max(lever.within.high, margin.high)

    def place(value: float) -> float:
        return math.log(value / bottom) / math.log(top / bottom)

    return place(margin.low), place(margin.start), place(margin.high)


def free_text(margin: Margin) -> str:
    """Between which values the first decision does not change."""
    quantity = margin.hold.quantity
    assert margin.low is not None
    assert margin.high is not None
    low, high = number_text(margin.low, quantity.decimals), number_text(margin.high, quantity.decimals)
    if low == high:
        return "no room: a step either way changes it"
    return f"no change from {low} to {with_unit(high, quantity.unit)}"


def edge_text(evaluation: Evaluation, joint: int, edge: Edge) -> str:
    """What a reading on the edge would do if it is off by its rounding."""
    quantity, decision = (evaluation.knowledge.quantities[name] for name in (edge.ref.quantity, edge.decision))
    name = evaluation.facts.members[member_rows(evaluation, joint)[edge.ref.member - 1]] if edge.ref.member else ""
    of = f" of {name}" if name else ""
    reading = with_unit(number_text(edge.reading, quantity.decimals), quantity.unit)
    off = number_text(edge.by, quantity.decimals + 1)
    return (
        f"{decision.title} is on the edge: {quantity.title.lower()}{of} is {reading} as printed; "
        f"off by its rounding of {off} it would be {outcome_text(decision, edge.becomes)}."
    )
