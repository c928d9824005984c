"""A formula as a product: the factors that settle its sign, or which way it moves with one name."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np

from weldbasis.formula.intervals import Jet, jet_of
from weldbasis.formula.parse import Binary, Formula, Node, Number
from weldbasis.formula.search import box_jet


def part_formula(node: Node) -> Formula:
    """A part of a formula as a formula; formulas are the same where their texts are, so the text spells the tree."""
    return Formula(node, repr(node))


def factors(node: Node, sign: str = "*") -> Iterator[tuple[str, Node]]:
    """The factors and divisors of a product, each with the sign before it."""
    if isinstance(node, Binary) and node.sign in ("*", "/"):
        yield from factors(node.left, sign)
        yield from factors(node.right, sign if node.sign == "*" else "/" if sign == "*" else "*")
    else:
        yield sign, node


def bounds_over(node: Node, low: Mapping[str, float], high: Mapping[str, float]) -> Jet:
    """Bounds on a part's value and slopes over one box."""
    formula = part_formula(node)
    if not formula.names:
        return jet_of(formula, {}, {}, 1)
    bottom, top = (np.array([[end[name]] for name in formula.names], np.float64) for end in (low, high))
    return box_jet(formula, bottom, top)


def what_turns(formula: Formula, name: str, low: Mapping[str, float], high: Mapping[str, float]) -> Formula:
    """The formula without the factors that are never below zero in the box and do not hold the name.

    It rises and falls with the name wherever the formula does.
    """
    product: Node = Number(1.0, "1")
    for sign, node in factors(formula.root):
        bounds = bounds_over(node, low, high)
        if name in part_formula(node).names or not bool((bounds.defined & (bounds.low >= 0)).all()):
            product = Binary(sign, product, node)
    return part_formula(product)
