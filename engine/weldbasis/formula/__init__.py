"""Formulas: text to tree, value at points, hull over sets, print with figures put in."""

from weldbasis.formula.parse import Comparison, Formula, FormulaError, parse_comparison, parse_formula
from weldbasis.formula.points import value_at
from weldbasis.formula.sets import Ranges, range_over, slopes
from weldbasis.formula.show import show, symbolic

__all__ = [
    "Comparison",
    "Formula",
    "FormulaError",
    "Ranges",
    "parse_comparison",
    "parse_formula",
    "range_over",
    "show",
    "slopes",
    "symbolic",
    "value_at",
]
