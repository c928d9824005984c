"""Kind `model`: a physical model of the engine's registry, monotone in every argument, evaluated at two corners."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from weldbasis.kinds.compiled import (
    Compiled,
    Explanation,
    Kind,
    compile_common,
    flags_of,
    gate,
    read_range,
    refuse,
    to_vocabulary,
)
from weldbasis.kinds.view import View
from weldbasis.knowledge import Knowledge, Rule
from weldbasis.models import MODELS, Model
from weldbasis.problem import nearest
from weldbasis.units import conversion
from weldbasis.values import Column, Floats, Truth, numbers_where
from weldbasis.words import range_text, with_unit


@dataclass(frozen=True)
class Physical:
    """The model and its constants as the rule states them."""

    model: Model
    constants: Mapping[str, float]


def compile_model(rule: Rule, knowledge: Knowledge) -> Compiled:
    """Find the model and bind every argument and constant it needs."""
    name = str(rule.body["model"])
    if name not in MODELS:
        raise refuse(rule, f"there is no model {name!r}", "model", do=nearest(name, MODELS))
    model = MODELS[name]
    constants = {key: float(value) for key, value in rule.body.get("constants", {}).items()}
    for part, wanted, have in (
        ("constants", set(model.constants), set(constants)),
        ("reads", set(model.arguments), {read.name for read in rule.reads}),
    ):
        if missing := sorted(wanted - have):
            raise refuse(rule, f"model {name} needs {missing[0]} among its {part}", part)
        if extra := sorted(have - wanted):
            raise refuse(
                rule, f"model {name} has no {extra[0]} among its {part}", part, extra[0], do=nearest(extra[0], wanted)
            )
    compiled = compile_common(rule, knowledge, Physical(model, constants))
    for read in compiled.reads:
        _same_unit(rule, read.name, _read_unit(rule, read.name, read.quantity.unit), model.arguments[read.name].unit)
    return compiled


def _read_unit(rule: Rule, name: str, vocabulary_unit: str) -> str:
    written = next(read.unit for read in rule.reads if read.name == name)
    return written or vocabulary_unit


def _same_unit(rule: Rule, name: str, have: str, wanted: str) -> None:
    if have != wanted and conversion(have, wanted) != (1.0, 0.0):
        raise refuse(
            rule,
            f"the model takes {name} in {wanted!r}, the rule hands it over in {have!r}",
            "reads",
            name,
            do=f"write {name}: {{quantity: …, unit: {wanted}}}",
        )


def evaluate_model(compiled: Compiled, view: View) -> Mapping[str, Column]:
    """The exact range: every argument at the end that lowers, then at the end that raises the result."""
    body: Physical = compiled.body
    there = gate(compiled, view, tuple(read.quantity.id for read in compiled.reads))
    lowest: dict[str, Floats] = {}
    highest: dict[str, Floats] = {}
    points = True
    for read in compiled.reads:
        low, high = read_range(compiled, read, view, there)
        points = points and low is high
        rises = body.model.arguments[read.name].slope == "up"
        lowest[read.name], highest[read.name] = (low, high) if rises else (high, low)
    with np.errstate(all="ignore"):
        low = body.model.evaluate(lowest, body.constants)
        high = low if points else body.model.evaluate(highest, body.constants)
    low, high = to_vocabulary(compiled, low, high)
    defined = np.isfinite(low) & np.isfinite(high)
    there = there & Truth(defined, defined)
    return {compiled.gives[0].id: numbers_where(there, low, high, flags_of(compiled, view))}


def explain_model(compiled: Compiled, view: View, row: int) -> Explanation:
    """The model's name, its arguments and its constants."""
    body: Physical = compiled.body
    there = gate(compiled, view, ())
    parts = []
    for read in compiled.reads:
        low, high = read_range(compiled, read, view, there)
        text = range_text(float(low[row]), float(high[row]), read.quantity.decimals)
        parts.append(f"{read.name} {with_unit(text, body.model.arguments[read.name].unit)}")
    parts += [f"{name} = {value:g}" for name, value in sorted(body.constants.items())]
    return Explanation(f"{body.model.name}: " + ", ".join(parts))


MODEL = Kind("model", compile_model, evaluate_model, explain_model)
