"""How every quantity of one joint came about, a step each, put into words only when asked for."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from weldbasis.evaluate import Evaluation
from weldbasis.facts import Origin
from weldbasis.kinds import KINDS, Compiled
from weldbasis.knowledge import Quantity
from weldbasis.reading import value_of
from weldbasis.sentences import nothing_given, say, value_text, why_not
from weldbasis.trace import Ref, Step, Value
from weldbasis.values import may_be_at


def member_rows(evaluation: Evaluation, row: int) -> range:
    """The rows of the members of one joint."""
    starts = evaluation.views["member"].starts
    last = int(starts[row + 1]) if row + 1 < len(starts) else len(evaluation.facts.members)
    return range(int(starts[row]), last)


class Steps(Mapping[Ref, Step]):
    """The steps of one joint in the order of the graph, each put into words only when it is asked for."""

    def __init__(self, evaluation: Evaluation, row: int) -> None:
        self._evaluation = evaluation
        self._row = row
        self._members = member_rows(evaluation, row)
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
    members = member_rows(evaluation, row)
    for ref in refs_in_order(evaluation, len(members)):
        quantity = evaluation.knowledge.quantities[ref.quantity]
        at = members[ref.member - 1] if ref.member else row
        yield ref, value_of(evaluation.columns[ref.quantity], quantity, at)


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
        origin = origin_at(evaluation, quantity.id, row)
        return Step(ref, value, "given", sentence=_given_sentence(quantity, value, origin), origin=origin)
    name = evaluation.graph.giving.get(quantity.id)
    if name is None:
        return Step(ref, value, "input-missing", sentence=f"{quantity.title} is not given.")
    return _rule_step(evaluation, evaluation.graph.rules[name], value, row, ref)


def origin_at(evaluation: Evaluation, quantity: str, row: int) -> Origin | None:
    """Where a given value of one row comes from."""
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
        state, sentence = nothing_given(rule, view, row, reasons)
        return Step(ref, value, state, rule.rule.id, sentence, "", reads, reasons, explained.candidates)
    sentence = say(evaluation, rule, value, row)
    return Step(ref, value, "gave", rule.rule.id, sentence, explained.figures, reads, reasons, explained.candidates)


def _ref_of(evaluation: Evaluation, quantity: str, asker: Ref) -> Ref:
    return Ref(quantity, asker.member if evaluation.knowledge.quantities[quantity].of == "member" else 0)
