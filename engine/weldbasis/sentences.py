"""What a rule has to say of one row in words: its sentence with values put in, or why it gives nothing."""

from __future__ import annotations

import re

from weldbasis.evaluate import Evaluation
from weldbasis.kinds import Compiled, View
from weldbasis.kinds.compiled import gate
from weldbasis.kinds.condition import failures, judge
from weldbasis.knowledge import Quantity
from weldbasis.reading import value_of
from weldbasis.trace import StepState, Value
from weldbasis.values import Truth, may_be_at, surely_at
from weldbasis.words import levels_text, range_text, with_unit

_NAME = re.compile(r"\{(\w+)\}")


def why_not(rule: Compiled, view: View, row: int) -> tuple[str, ...]:
    """Why a rule gives, or may give, nothing for one row: what it asks that is not met, limits left, reads missing."""
    found = [*failures(rule.applies, view, row), *failures(rule.valid, view, row)]
    for read in rule.reads:
        column = view.column(read.quantity.id)
        if not surely_at(column, row):
            may = may_be_at(column, row)
            found.append(f"{read.quantity.title} {'may have no value' if may else 'has no value here'}")
    return tuple(dict.fromkeys(found))


def nothing_given(rule: Compiled, view: View, row: int, reasons: tuple[str, ...]) -> tuple[StepState, str]:
    """Why a rule gives nothing for one row: how its step stands, and the sentence that says so."""
    title = rule.rule.title
    if rule.applies and not bool(judge_once(rule, view, "applies").may[row]):
        return "not-applicable", f"{title} does not apply: {'; '.join(failures(rule.applies, view, row))}."
    if rule.valid and not bool(judge_once(rule, view, "valid").may[row]):
        return "withheld", f"{title} is withheld: {'; '.join(failures(rule.valid, view, row))}."
    if bool(gate(rule, view).may[row]) and not reasons:
        allowed = "what it works out is nothing that may stand for it" if rule.rule.kind == "formula" else ""
        return "withheld", f"{title} gives no value here: {allowed or 'nothing in it covers this case'}."
    return "input-missing", f"{title} gives no value: {'; '.join(reasons) or 'nothing in it covers this case'}."


def judge_once(rule: Compiled, view: View, part: str) -> Truth:
    """The truth of one of a rule's conditions, kept on a complete view."""
    condition = rule.applies if part == "applies" else rule.valid
    return view.once((part, rule.rule.id), lambda: judge(condition, view))


def say(evaluation: Evaluation, rule: Compiled, value: Value, row: int) -> str:
    """The rule's sentence with this row's values put in; `{result}` is what it gave."""
    view = evaluation.views[rule.rule.for_each]
    pieces = view.once(("say", rule.rule.id), lambda: _NAME.split(rule.rule.say))
    words = [
        piece if place % 2 == 0 else _word(evaluation, rule, view, piece, value, row)
        for place, piece in enumerate(pieces)
    ]
    return "".join(words)


def _word(evaluation: Evaluation, rule: Compiled, view: View, name: str, value: Value, row: int) -> str:
    if name == "result" and rule.gives:
        return value_text(rule.gives[0], value, unit=False)
    read = next((read for read in rule.reads if read.name == name), None)
    quantity = read.quantity if read else evaluation.knowledge.quantities.get(name)
    if quantity is None:
        return f"{{{name}}}"
    shown = value_of(view.column(quantity.id), quantity, row)
    if read and read.converts and shown.low is not None and shown.high is not None:
        low, high = (read.factor * end + read.offset for end in (shown.low, shown.high))
        return range_text(low, high, quantity.decimals)
    return value_text(quantity, shown, unit=False)


def value_text(quantity: Quantity, value: Value, unit: bool = True) -> str:
    """A value in words with its unit: "110 to 125 °C", "high", "none"."""
    if value.presence == "absent":
        return "none"
    if value.low is None or value.high is None:
        return levels_text(quantity, value.any_of)
    text = range_text(value.low, value.high, quantity.decimals)
    return with_unit(text, quantity.unit) if unit else text


def outcome_text(decision: Quantity, value: Value) -> str:
    """A decision's set in words, with the doubt whether it is covered."""
    if value.presence == "absent":
        return "not covered"
    return value_text(decision, value) + (" or not covered" if value.presence == "maybe" else "")
