"""Which rule comes nearest to covering what no rule covers, and which of its limits are missed by how much.

The distance of a rule is the sum of what its limits are missed by, each as a share of the limit, together with the
distance of whatever it reads and has not. A level that does not fit, a figure that a table has not, and an input that
is not given each count as so many whole limits, so that a rule missed by a figure is named before them.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass

import numpy as np

from weldbasis.evaluate import Evaluation
from weldbasis.kinds import Compiled, View
from weldbasis.kinds.condition import Condition, Test, failure, judge, judge_test
from weldbasis.kinds.gather import Gather
from weldbasis.kinds.governing import Governing
from weldbasis.knowledge import Quantity
from weldbasis.reading import value_of
from weldbasis.values import Numbers, may_be_at
from weldbasis.words import levels_text, range_text, with_unit

_NOT_GIVEN, _NO_FIGURE, _OTHER_LEVEL = 20.0, 30.0, 40.0


@dataclass(frozen=True)
class Gap:
    """How far a rule is from giving a value, as a sum of shares of its limits, and each limit missed in words."""

    distance: float
    rule: str = ""
    misses: tuple[str, ...] = ()


_NONE = Gap(0.0)


def nearest_gap(evaluation: Evaluation, quantity: str, row: int) -> Gap:
    """The nearest rule below a quantity of a joint that has surely no value, with what keeps it from giving one."""
    return _Search(evaluation, {}).of(evaluation.knowledge.quantities[quantity], row)


def nearest_text(evaluation: Evaluation, quantity: str, row: int) -> str:
    """Which rule comes nearest to a decision that no rule covers, with the limits it misses."""
    gap = nearest_gap(evaluation, quantity, row)
    if not gap.rule:
        return "No rule gives it."
    return f"The nearest rule is {evaluation.knowledge.rules[gap.rule].title}: {'; '.join(gap.misses)}."


@dataclass(frozen=True)
class _Search:
    evaluation: Evaluation
    known: dict[tuple[str, int], Gap]

    def of(self, quantity: Quantity, row: int) -> Gap:
        """What keeps a quantity from having a value at a row of its own scope."""
        if may_be_at(self.evaluation.columns[quantity.id], row):
            return _NONE
        key = (quantity.id, row)
        if key not in self.known:
            name = self.evaluation.graph.giving.get(quantity.id)
            missing = Gap(_NOT_GIVEN, "", (f"{quantity.title} is not given",))
            self.known[key] = self._of_rule(self.evaluation.graph.rules[name], row) if name else missing
        return self.known[key]

    def _of_rule(self, rule: Compiled, row: int) -> Gap:
        view = self.evaluation.views[rule.rule.for_each]
        applies, valid = (_sum(self._tests(part, view, row)) for part in (rule.applies, rule.valid))
        if applies is not _NONE and not applies.rule:  # made for another case, which is further off than any figure
            applies = Gap(applies.distance + _OTHER_LEVEL, "", applies.misses)
        own = _sum([applies, valid])
        if isinstance(rule.body, Gather):
            below = self._gathered(rule.body, view, row)
        elif isinstance(rule.body, Governing):
            below = _least(self._candidate(c.quantity, c.when, view, row) for c in rule.body.choices)
        else:
            below = _sum(self._below(read.quantity, view, row) for read in rule.reads)
        if own is _NONE and below is _NONE:
            below = Gap(_NO_FIGURE, rule.rule.id, (f"it has no figure for {self._reads(rule, view, row)}",))
        both = _sum([own, below])
        # Whose limit it is: that of the rule below which gives nothing, unless this rule's own is missed too.
        named = (below if own is _NONE else own).rule or rule.rule.id
        return Gap(both.distance, named, both.misses)

    def _below(self, quantity: Quantity, view: View, row: int) -> Gap:
        """A read of a rule: of its own scope, or of the joint that a part belongs to."""
        if may_be_at(view.column(quantity.id), row):
            return _NONE
        facts = self.evaluation.facts
        outside = quantity.of == "joint" and view is self.evaluation.views["member"]
        return self.of(quantity, int(facts.joint_of[row]) if outside else row)

    def _candidate(self, quantity: Quantity, when: Condition, view: View, row: int) -> Gap:
        return _sum([*self._tests(when, view, row), self._below(quantity, view, row)])

    def _gathered(self, body: Gather, view: View, row: int) -> Gap:
        members = view.members
        first = int(members.starts[row])
        last = int(members.starts[row + 1]) if row + 1 < len(members.starts) else members.rows
        among = judge(body.where, members).may if body.where else np.ones(members.rows, bool)
        gaps = [self.of(body.of, at) for at in range(first, last) if among[at]]
        if not gaps:
            return _least(
                _sum([*self._tests(body.where, members, at), self.of(body.of, at)]) for at in range(first, last)
            )
        return min(gaps, key=_order) if not body.whole else max(gaps, key=_order)

    def _tests(self, condition: Condition, view: View, row: int) -> Iterator[Gap]:
        for test in condition.tests:
            gap = self._test(test, view, row)
            if gap is not _NONE:
                yield gap
        if condition.any_of:
            yield _least(_sum(self._tests(part, view, row)) for part in condition.any_of)

    def _test(self, test: Test, view: View, row: int) -> Gap:
        """What one demand is missed by; nothing where it may hold."""
        if bool(judge_test(test, view).may[row]):
            return _NONE
        column = view.column(test.quantity.id)
        if test.there == "absent":
            return Gap(_OTHER_LEVEL, "", (failure(test, view, row),))
        if not may_be_at(column, row):
            return self._below(test.quantity, view, row)
        if not isinstance(column, Numbers):
            return Gap(_OTHER_LEVEL, "", (failure(test, view, row),))
        over, under = float(column.low[row]) - test.range.high, test.range.low - float(column.high[row])
        by, limit = (over, test.range.high) if over >= under else (under, test.range.low)
        return Gap(max(by, 0.0) / (abs(limit) or 1.0), "", (failure(test, view, row),))

    def _reads(self, rule: Compiled, view: View, row: int) -> str:
        words = []
        for read in rule.reads:
            quantity = read.quantity
            value = value_of(view.column(quantity.id), quantity, row)
            if value.low is None or value.high is None:
                text = levels_text(quantity, value.any_of)
            else:
                text = with_unit(range_text(value.low, value.high, quantity.decimals), quantity.unit)
            words.append(f"{quantity.title} {text}")
        return " with ".join(words) or "this case"


def _order(gap: Gap) -> tuple[float, str]:
    return gap.distance, gap.rule


def _least(gaps: Iterable[Gap]) -> Gap:
    return min(gaps, key=_order, default=_NONE)


def _sum(gaps: Iterable[Gap]) -> Gap:
    """Everything missed together; whose limits they are is kept where they are of one rule."""
    some = [gap for gap in gaps if gap is not _NONE]
    if not some:
        return _NONE
    nearest = next((gap.rule for gap in some if gap.rule), "")
    misses = tuple(dict.fromkeys(text for gap in some for text in gap.misses))
    owned = any(not gap.rule for gap in some)
    return Gap(sum(gap.distance for gap in some), "" if owned and len(some) > 1 else nearest, misses)
