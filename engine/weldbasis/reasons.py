"""Read one joint's reasons out of the columns: a step for every quantity, decisions with their chains, findings."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping

from weldbasis.evaluate import Evaluation
from weldbasis.facts import Origin
from weldbasis.graph import quantity_node
from weldbasis.kinds import KINDS, Compiled, View
from weldbasis.kinds.compiled import gate
from weldbasis.kinds.condition import failures, judge
from weldbasis.knowledge import Quantity
from weldbasis.nearest import nearest_text
from weldbasis.reading import value_of
from weldbasis.settle import ANALYSIS, Narrowing, open_inputs, settle
from weldbasis.state import demanding_end, state_of
from weldbasis.trace import Decision, Finding, JointTrace, Ref, Step, StepState, Value
from weldbasis.values import Truth, may_be_at, surely_at
from weldbasis.words import levels_text, range_text, with_unit

_ASKING = frozenset({"recommended", "required"})
_NAME = re.compile(r"\{(\w+)\}")


def trace_joint(
    evaluation: Evaluation, row: int, narrowings: Mapping[tuple[int, str], tuple[Narrowing, ...]] | None = None
) -> JointTrace:
    """All reasons of the joint at `row`.

    `narrowings` hands over what would settle each open decision where it is known already for many joints;
    else it is worked out for this joint.
    """
    if narrowings is None:
        narrowings = settle(evaluation, [row])
    steps = Steps(evaluation, row)
    decisions = tuple(_decision(quantity, steps) for quantity in evaluation.knowledge.decisions)
    # Two parts may say the same of the joint; it counts once.
    findings = tuple(dict.fromkeys(findings_of(evaluation, row, narrowings)))
    names = tuple(evaluation.facts.members[at] for at in _member_rows(evaluation, row))
    given, gave = _with_values(evaluation, row)
    return JointTrace(evaluation.facts.joints[row], names, decisions, findings, steps, given, gave)


def _member_rows(evaluation: Evaluation, row: int) -> range:
    starts = evaluation.views["member"].starts
    last = int(starts[row + 1]) if row + 1 < len(starts) else len(evaluation.facts.members)
    return range(int(starts[row]), last)


class Steps(Mapping[Ref, Step]):
    """The steps of one joint in the order of the graph, each put into words only when it is asked for."""

    def __init__(self, evaluation: Evaluation, row: int) -> None:
        self._evaluation = evaluation
        self._row = row
        self._members = _member_rows(evaluation, row)
        self._built: dict[Ref, Step] = {}

    def __getitem__(self, ref: Ref) -> Step:
        if ref not in self._built:
            quantity = self._evaluation.knowledge.quantities[ref.quantity]
            if ref.member > len(self._members) or (ref.member == 0) != (quantity.of == "joint"):
                raise KeyError(ref)
            self._built[ref] = _step(self._evaluation, quantity, self._row_of(ref), ref)
        return self._built[ref]

    def __iter__(self) -> Iterator[Ref]:
        return iter(refs_in_order(self._evaluation, len(self._members)))

    def __len__(self) -> int:
        return len(refs_in_order(self._evaluation, len(self._members)))

    def _row_of(self, ref: Ref) -> int:
        return self._members[ref.member - 1] if ref.member else self._row


def values_of(evaluation: Evaluation, row: int) -> Iterator[tuple[Ref, Value]]:
    """The set of every quantity of one joint, without its reasons."""
    members = _member_rows(evaluation, row)
    for ref in refs_in_order(evaluation, len(members)):
        quantity = evaluation.knowledge.quantities[ref.quantity]
        at = members[ref.member - 1] if ref.member else row
        yield ref, value_of(evaluation.columns[ref.quantity], quantity, at)


def _with_values(evaluation: Evaluation, row: int) -> tuple[tuple[Ref, ...], tuple[Ref, ...]]:
    """What was given for one joint, and what rules gave a value."""
    members = _member_rows(evaluation, row)
    given, gave = [], []
    for ref in refs_in_order(evaluation, len(members)):
        at = members[ref.member - 1] if ref.member else row
        column = evaluation.facts.given.get(ref.quantity)
        if column is not None and may_be_at(column, at):
            given.append(ref)
        elif may_be_at(evaluation.columns[ref.quantity], at):
            gave.append(ref)
    return tuple(given), tuple(gave)


def refs_in_order(evaluation: Evaluation, members: int) -> tuple[Ref, ...]:
    """Every quantity of a joint and of each of its members, in the order in which they are worked out."""
    return evaluation.views["joint"].once(("refs", members), lambda: tuple(_refs(evaluation, members)))


def _refs(evaluation: Evaluation, members: int) -> Iterator[Ref]:
    for quantity in _quantities_in_order(evaluation):
        if quantity.of == "joint":
            yield Ref(quantity.id)
        else:
            yield from (Ref(quantity.id, number) for number in range(1, members + 1))


def _quantities_in_order(evaluation: Evaluation) -> list[Quantity]:
    quantities = evaluation.knowledge.quantities
    given = [quantities[q.id] for name in evaluation.graph.order for q in evaluation.graph.rules[name].gives]
    roots = [quantity for quantity in quantities.values() if quantity.id not in evaluation.graph.giving]
    return roots + given


def _step(evaluation: Evaluation, quantity: Quantity, row: int, ref: Ref) -> Step:
    value = value_of(evaluation.columns[quantity.id], quantity, row)
    given = evaluation.facts.given.get(quantity.id)
    if given is not None and may_be_at(given, row):
        origin = _origin(evaluation, quantity.id, row)
        return Step(ref, value, "given", sentence=_given_sentence(quantity, value, origin), origin=origin)
    name = evaluation.graph.giving.get(quantity.id)
    if name is None:
        return Step(ref, value, "input-missing", sentence=f"{quantity.title} is not given.")
    return _rule_step(evaluation, evaluation.graph.rules[name], value, row, ref)


def _origin(evaluation: Evaluation, quantity: str, row: int) -> Origin | None:
    origins = evaluation.facts.origins.get(quantity)
    return evaluation.facts.origin_list[int(origins[row])] if origins is not None else None


def _given_sentence(quantity: Quantity, value: Value, origin: Origin | None) -> str:
    return f"{quantity.title}: {value_text(quantity, value)}" + (f" ({origin.text})." if origin else ".")


def _rule_step(evaluation: Evaluation, rule: Compiled, value: Value, row: int, ref: Ref) -> Step:
    view = evaluation.views[rule.rule.for_each]
    explained = KINDS[rule.rule.kind].explain(rule, view, row)
    reads = tuple(_ref_of(evaluation, name, ref) for name in rule.inputs)
    reasons = why_not(rule, view, row) if value.presence != "present" else ()
    if value.presence == "absent":
        state, sentence = _nothing_given(rule, view, row, reasons)
        return Step(ref, value, state, rule.rule.id, sentence, "", reads, reasons, explained.candidates)
    sentence = say(evaluation, rule, value, row)
    return Step(ref, value, "gave", rule.rule.id, sentence, explained.figures, reads, reasons, explained.candidates)


def _ref_of(evaluation: Evaluation, quantity: str, asker: Ref) -> Ref:
    return Ref(quantity, asker.member if evaluation.knowledge.quantities[quantity].of == "member" else 0)


def why_not(rule: Compiled, view: View, row: int) -> tuple[str, ...]:
    """Why a rule gives, or may give, nothing for one row: what it asks that is not met, limits left, reads missing."""
    found = [*failures(rule.applies, view, row), *failures(rule.valid, view, row)]
    for read in rule.reads:
        column = view.column(read.quantity.id)
        if not surely_at(column, row):
            may = may_be_at(column, row)
            found.append(f"{read.quantity.title} {'may have no value' if may else 'has no value here'}")
    return tuple(dict.fromkeys(found))


def _nothing_given(rule: Compiled, view: View, row: int, reasons: tuple[str, ...]) -> tuple[StepState, str]:
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


def _decision(quantity: Quantity, steps: Mapping[Ref, Step]) -> Decision:
    ref = Ref(quantity.id)
    step = steps[ref]
    chain = tuple(dict.fromkeys(_chain(steps, ref, set())))
    state = state_of(step.value, quantity)
    governing = governing_rules(steps, ref)
    return Decision(ref, step.value, state, demanding_end(step.value, quantity), governing, chain)


def governing_rules(steps: Mapping[Ref, Step], ref: Ref) -> tuple[str, ...]:
    """The rules that settled a quantity: down through choices, and through what only rounds or caps, to its origin."""
    found: list[str] = []
    seen: set[Ref] = set()
    queue = [ref]
    while queue:
        step = steps[queue.pop(0)]
        if step.ref in seen or step.state != "gave":
            continue
        seen.add(step.ref)
        below = [candidate.ref for candidate in step.candidates if candidate.governs] or _passed_on(step, steps)
        if not below:
            found.append(step.rule)
        queue += below
    return tuple(dict.fromkeys(found))


def _passed_on(step: Step, steps: Mapping[Ref, Step]) -> list[Ref]:
    """The one worked-out read of a step with the step's own unit: such a rule only rounds or caps it."""
    worked = [read for read in step.reads if read in steps and steps[read].state == "gave"]
    same = len(worked) == 1 and step.value.unit and steps[worked[0]].value.unit == step.value.unit
    return worked if same else []


def _chain(steps: Mapping[Ref, Step], ref: Ref, seen: set[Ref]) -> Iterator[Ref]:
    """The steps from a quantity down to the inputs: of a choice only what governs, of all else every read."""
    if ref in seen or ref not in steps:
        return
    seen.add(ref)
    yield ref
    step = steps[ref]
    if step.state == "given":
        return
    governing = [candidate.ref for candidate in step.candidates if candidate.governs]
    for below in governing or step.reads:
        yield from _chain(steps, below, seen)


def findings_of(
    evaluation: Evaluation, row: int, narrowings: Mapping[tuple[int, str], tuple[Narrowing, ...]]
) -> Iterator[Finding]:
    """The findings of limit rules, then what is open with what would settle it, then what no rule covers."""
    for name, truth in evaluation.findings.items():
        rule = evaluation.graph.rules[name]
        rows = [row] if rule.rule.for_each == "joint" else list(_member_rows(evaluation, row))
        for at in rows:
            if bool(truth.may[at]):
                sure = bool(truth.surely[at])
                level = rule.body.level if sure else rule.body.level_if_unsure
                if level != "none":
                    text = say(evaluation, rule, Value(), at)
                    text = text if sure else f"{text} (not sure: {_unsure(rule, evaluation, at)})"
                    leave = evaluation.facts.set_aside.get(name, {}).get(row)
                    if leave:
                        yield Finding("note", name, f"Set aside ({leave.text}): {text}", sure)
                    else:
                        yield Finding(level, name, text, sure)
    yield from _conceded(evaluation, row)
    for quantity in evaluation.knowledge.decisions:
        yield from _undecided(evaluation, quantity, row, narrowings)


def _conceded(evaluation: Evaluation, row: int) -> Iterator[Finding]:
    """What a concession puts in the place of what the rules give, and whether that asks for less."""
    for name, ruled in evaluation.overruled.items():
        quantity = evaluation.knowledge.quantities[name]
        origin = _origin(evaluation, name, row) if quantity.of == "joint" else None
        if origin is None or origin.kind != "concession" or not may_be_at(evaluation.facts.given[name], row):
            continue
        value, instead = value_of(evaluation.columns[name], quantity, row), value_of(ruled, quantity, row)
        words = {1: ", which asks for more", -1: ", which asks for less", 0: ""}[_asks(quantity, value, instead)]
        text = f"{quantity.title} {value_text(quantity, value)} instead of {value_text(quantity, instead)}{words}"
        yield Finding("caution", evaluation.graph.giving[name], f"{text}: {origin.text}")


def _asks(quantity: Quantity, value: Value, instead: Value) -> int:
    """1 where the demanding end of a value asks for more than that of another, −1 for less, 0 where nobody can say."""
    one, other = demanding_end(value, quantity), demanding_end(instead, quantity)
    if one is None or other is None or one == other or quantity.worse == "neither":
        return 0
    if isinstance(one, str) or isinstance(other, str):
        more = quantity.order.index(str(one)) > quantity.order.index(str(other))
        return 1 if more == (quantity.worse == "last") else -1
    return 1 if (one > other) == (quantity.worse == "higher") else -1


def _unsure(rule: Compiled, evaluation: Evaluation, row: int) -> str:
    return "; ".join(why_not(rule, evaluation.views[rule.rule.for_each], row)) or "the sets leave it open"


def _undecided(
    evaluation: Evaluation, quantity: Quantity, row: int, narrowings: Mapping[tuple[int, str], tuple[Narrowing, ...]]
) -> Iterator[Finding]:
    value = value_of(evaluation.columns[quantity.id], quantity, row)
    state = state_of(value, quantity)
    rule = evaluation.graph.giving.get(quantity.id, "")
    if quantity.part_of:
        if state == "uncovered" and _to_be_done(evaluation, quantity.part_of, row):
            text = f"{quantity.title} is asked for, and the rules give none."
            yield Finding("hold", rule, f"{text} {nearest_text(evaluation, quantity.id, row)}")
        return
    if state == "uncovered":
        yield Finding(
            "hold" if quantity.given == "must" else "caution",
            rule,
            f"{quantity.title}: the rules do not cover this case. {nearest_text(evaluation, quantity.id, row)}",
        )
    if state == "open":
        text = f"{quantity.title} is open: {value_text(quantity, value)}"
        if value.presence == "maybe":
            text += ", or not covered"
        yield Finding("hold", rule, f"{text}. {settling_text(evaluation, quantity, row, narrowings)}")


def _to_be_done(evaluation: Evaluation, decision: str, row: int) -> bool:
    """Whether a decision may have something done, so that its parts have to say how."""
    quantity = evaluation.knowledge.quantities[decision]
    return not _ASKING.isdisjoint(value_of(evaluation.columns[decision], quantity, row).any_of)


def settling_text(
    evaluation: Evaluation, decision: Quantity, row: int, narrowings: Mapping[tuple[int, str], tuple[Narrowing, ...]]
) -> str:
    """What would settle a decision, best first; where no input narrows it alone, the open ones it rests on."""
    found = narrowings.get((row, decision.id), ())
    if found:
        return "To know " + "; ".join(_gain(evaluation, row, narrowing) for narrowing in found[:4]) + "."
    titles = ", ".join(open_inputs(evaluation, decision, row)) or "no input that is open"
    return f"No single input of the project narrows it; it rests on {titles}."


def _gain(evaluation: Evaluation, row: int, narrowing: Narrowing) -> str:
    gain = "settles it" if narrowing.settles else f"leaves {narrowing.left}"
    member = narrowing.ref.member
    name = evaluation.facts.members[_member_rows(evaluation, row)[member - 1]] if member else ""
    if narrowing.ref.quantity == ANALYSIS:
        return f"the whole analysis of {name} {gain}"
    quantity = evaluation.knowledge.quantities[narrowing.ref.quantity]
    title = quantity.title if quantity.symbol else quantity.title.lower()
    whose = f" of {name}" if member else ""
    return f"{title}{whose} (now {value_text(quantity, narrowing.now)}) {gain}"


def bears_on_text(evaluation: Evaluation, quantity: str) -> tuple[str, ...]:
    """The decisions that a quantity bears on, by title, for pages and messages."""
    below = evaluation.graph.bears_on(quantity_node(quantity))
    quantities = evaluation.knowledge.quantities
    return tuple(quantities[n.id].title for n in below if n.sort == "quantity" and quantities[n.id].decision)
