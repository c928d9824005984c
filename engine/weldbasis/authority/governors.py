"""Which rules settle a decision, for all joints at once: down through choices, and through what only rounds or caps.

The same judgement as `reasons.governing_rules`, which reads it for one joint with its words.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from weldbasis.evaluate import Evaluation
from weldbasis.kinds import Compiled, View
from weldbasis.kinds.gather import governing_members
from weldbasis.kinds.governing import governing_choices
from weldbasis.values import Bools, is_there


def governors(evaluation: Evaluation, decision: str) -> dict[str, Bools]:
    """For every rule that settles the decision of some joint, the joints where it does."""
    found: dict[str, Bools] = {}
    joints = len(evaluation.facts.joints)
    for rule, mask in _down(evaluation, decision, np.ones(joints, np.bool_)):
        at = _by_joint(evaluation, mask) if rule.rule.for_each == "member" else mask
        if at.any():
            found[rule.rule.id] = found.get(rule.rule.id, np.zeros(joints, np.bool_)) | at
    return found


def _by_joint(evaluation: Evaluation, members: Bools) -> Bools:
    starts = evaluation.views["member"].starts
    return np.logical_or.reduceat(members, starts) if len(members) else members


def gave(evaluation: Evaluation, quantity: str) -> Bools:
    """Where a rule, not the project, gave the quantity a value."""
    there = is_there(evaluation.columns[quantity]).may
    given = evaluation.facts.given.get(quantity)
    return there & ~is_there(given).may if given is not None else there


def _down(evaluation: Evaluation, quantity: str, mask: Bools) -> Iterator[tuple[Compiled, Bools]]:
    name = evaluation.graph.giving.get(quantity)
    mask = mask & gave(evaluation, quantity)
    if name is None or not mask.any():
        return
    rule = evaluation.graph.rules[name]
    view = evaluation.views[rule.rule.for_each]
    below: list[tuple[str, Bools]] = []
    if rule.rule.kind == "governing":
        below = list(governing_choices(rule, view))
    elif rule.rule.kind == "gather":
        below = [(rule.body.of.id, governing_members(rule, view))]
    chosen = np.zeros(len(mask), np.bool_)
    for read, governs in below:
        if rule.rule.kind == "gather":
            inside = governs & mask[view.joint_of]
            chosen |= _by_joint(evaluation, inside)
        else:
            inside = governs & mask
            chosen |= inside
        yield from _down(evaluation, read, inside)
    rest = mask & ~chosen
    for read, passes in _passing(evaluation, rule, quantity, view) if rule.rule.kind not in _CHOOSING else ():
        inside = rest & passes
        yield from _down(evaluation, read, _in_scope(evaluation, rule, read, inside))
        rest = rest & ~inside
    if rest.any():
        yield rule, rest


_CHOOSING = frozenset({"governing", "gather"})


def _in_scope(evaluation: Evaluation, rule: Compiled, read: str, mask: Bools) -> Bools:
    """A mask of the rule's rows as rows of what it reads: a rule for members may read a fact of the joint."""
    if rule.rule.for_each == evaluation.knowledge.quantities[read].of:
        return mask
    return _by_joint(evaluation, mask)


def _passing(evaluation: Evaluation, rule: Compiled, quantity: str, view: View) -> Iterator[tuple[str, Bools]]:
    """Reads that a rule only rounds or caps: the one worked-out read of a row, in the result's own unit."""
    quantities = evaluation.knowledge.quantities
    worked = {}
    for read in rule.inputs:
        there = gave(evaluation, read)
        worked[read] = there if quantities[read].of == rule.rule.for_each else there[view.joint_of]
    if not worked:
        return
    alone = np.sum(list(worked.values()), axis=0) == 1
    for read, there in worked.items():
        if quantities[quantity].unit and quantities[read].unit == quantities[quantity].unit:
            yield read, there & alone
