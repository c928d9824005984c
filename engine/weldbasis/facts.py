"""The facts of a project, ready for evaluation: columns of given values and where each came from."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

import numpy as np

from weldbasis.knowledge import Quantity
from weldbasis.values import Column, Ints

OriginKind = Literal[
    "certificate",
    "drawing",
    "procedure",
    "grade-limit",
    "era-envelope",
    "samples",
    "consumable",
    "project",
    "default",
    "assumption",
    "concession",
    "unknown",
]


@dataclass(frozen=True)
class Origin:
    """Where a given value comes from: what kind of paper, its words, and the line of the project file."""

    kind: OriginKind
    text: str
    place: str = ""


@dataclass(frozen=True)
class Facts:
    """Given values of all joints together.

    `given` maps a quantity id to a column over joints or members, by the quantity's scope. A row that is
    ABSENT there was not given, and a rule that gives the quantity then fills it. `joint_of` holds, for every
    member row, the row of its joint, in rising order; the weld metal is the last member of every joint.
    `origins` holds, for every row of a given column, a place in `origin_list`. `set_aside` holds, by limit rule,
    the rows of joints whose finding a concession sets aside.
    """

    joints: tuple[str, ...]
    members: tuple[str, ...]
    joint_of: Ints
    given: Mapping[str, Column]
    origins: Mapping[str, Ints] = field(default_factory=dict)
    origin_list: tuple[Origin, ...] = ()
    set_aside: Mapping[str, Mapping[int, Origin]] = field(default_factory=dict)

    def repeated(self, rows: Ints, quantities: Mapping[str, Quantity]) -> tuple[Facts, Ints]:
        """The joints at these rows, each as often as it is named, and the member row that each new one comes from.

        Origins are left behind.
        """
        starts = np.searchsorted(self.joint_of, rows, side="left")
        sizes = np.searchsorted(self.joint_of, rows, side="right") - starts
        offsets = np.cumsum(sizes) - sizes
        joint_of = np.repeat(np.arange(len(rows)), sizes)
        members: Ints = np.arange(len(joint_of)) - offsets[joint_of] + starts[joint_of]
        given = {
            name: column.take(rows if quantities[name].of == "joint" else members)
            for name, column in self.given.items()
        }
        joints = tuple(self.joints[row] for row in rows.tolist())
        return Facts(joints, tuple(self.members[row] for row in members.tolist()), joint_of, given), members
