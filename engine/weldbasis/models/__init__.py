"""Physical models that rules name: plain functions over arrays, monotone in every argument.

A new model is one function in a module of its own and one entry here. Its constants come from the rule.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Literal

from weldbasis.models.diffusion import hours_to_centre_share, hours_to_mean_share
from weldbasis.values import Floats


@dataclass(frozen=True)
class Argument:
    """An argument of a model: its unit, and which way the result goes as it rises."""

    unit: str
    slope: Literal["up", "down"]


@dataclass(frozen=True)
class Model:
    """A model: what it says, its arguments, its constants with their units, the unit of its result, the function.

    `evaluate` takes arrays of one length by argument name and constants by name. It must be monotone in each
    argument as stated; a test samples that.
    """

    name: str
    says: str
    arguments: Mapping[str, Argument]
    constants: Mapping[str, str]
    unit: str
    evaluate: Callable[[Mapping[str, Floats], Mapping[str, float]], Floats]


_PLATE = {
    "thickness": Argument("mm", "up"),
    "temperature": Argument("degC", "down"),
    "share_left": Argument("", "down"),
}
_TWO_BRANCHES = {
    "d0_low_cm2_s": "cm**2/s",
    "e_low_j_mol": "J/mol",
    "d0_high_cm2_s": "cm**2/s",
    "e_high_j_mol": "J/mol",
    "gas_constant_j_mol_k": "J/mol/K",
}

MODELS: Mapping[str, Model] = {
    model.name: model
    for model in (
        Model(
            "plate-diffusion-time",
            "Hours until the mean hydrogen of a uniformly charged plate, open at both faces, has fallen to a share.",
            _PLATE,
            _TWO_BRANCHES,
            "h",
            hours_to_mean_share,
        ),
        Model(
            "plate-diffusion-time-centre",
            "Hours until the middle of a uniformly charged plate, open at both faces, has fallen to a share.",
            _PLATE,
            _TWO_BRANCHES,
            "h",
            hours_to_centre_share,
        ),
    )
}
