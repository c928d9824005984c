"""Rule kinds: what each checks, how it evaluates on columns of sets, and how it explains itself.

A new kind is one module and one line here.
"""

from __future__ import annotations

from collections.abc import Mapping

from weldbasis.kinds.compiled import Compiled, Explanation, Kind
from weldbasis.kinds.formula import FORMULA
from weldbasis.kinds.gather import GATHER
from weldbasis.kinds.governing import GOVERNING
from weldbasis.kinds.limit import LIMIT
from weldbasis.kinds.model import MODEL
from weldbasis.kinds.table import TABLE
from weldbasis.kinds.view import View
from weldbasis.knowledge import Knowledge, Rule

KINDS: Mapping[str, Kind] = {kind.name: kind for kind in (FORMULA, TABLE, GATHER, GOVERNING, MODEL, LIMIT)}


def compile_rule(rule: Rule, knowledge: Knowledge) -> Compiled:
    """A rule made ready for evaluation. Raises Refused with what is wrong in it."""
    return KINDS[rule.kind].compile(rule, knowledge)


__all__ = ["KINDS", "Compiled", "Explanation", "Kind", "View", "compile_rule"]
