"""Joints for properties: those of the example projects with inputs drawn anew."""

from __future__ import annotations

import numpy as np

from weldbasis.evaluate import Evaluation
from weldbasis.settling.trials import Pin, Trial, decided_again, member_rows, pin_to


def drawn_joints(evaluations: tuple[Evaluation, ...], seed: int, count: int = 4) -> Evaluation:
    """A small project of joints whose heat input, hydrogen, thickness, carbon and manganese are drawn anew."""
    rng = np.random.default_rng(seed)
    evaluation = evaluations[seed % len(evaluations)]
    quantities, trials = evaluation.knowledge.quantities, []
    for _ in range(count):
        joint = int(rng.integers(len(evaluation.facts.joints)))
        first = (member_rows(evaluation, joint)[0],)
        carbon, width = round(float(rng.uniform(0.06, 0.24)), 3), float(rng.choice([0.0, 0.02, 0.1]))
        manganese, wide = round(float(rng.uniform(0.5, 1.4)), 3), float(rng.choice([0.0, 0.3]))
        heat, more = round(float(rng.uniform(0.5, 3.0)), 2), float(rng.choice([0.0, 0.5]))
        pins = (
            Pin("heat_input", (joint,), heat, round(heat + more, 2)),
            pin_to(quantities["hydrogen"], (joint,), float(rng.choice([2.5, 3.0, 5.0, 7.0, 10.0]))),
            pin_to(quantities["member_thickness"], first, float(rng.integers(8, 60))),
            Pin("carbon", first, carbon, round(carbon + width, 3)),
            Pin("manganese", first, manganese, round(manganese + wide, 3)),
        )
        trials.append(Trial(joint, pins))
    return decided_again(evaluation, trials)
