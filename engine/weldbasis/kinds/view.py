"""The columns as the rows of one scope see them: a member also sees the facts of its joint."""

from __future__ import annotations

from collections.abc import Callable, Hashable, MutableMapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import TypeVar, cast

import numpy as np

from weldbasis.knowledge import Knowledge, Scope
from weldbasis.values import Bools, Column, Ints, absent_levels, absent_numbers

T = TypeVar("T")


@dataclass
class View:
    """Columns over the rows of one scope; `columns` is shared and grows as rules are evaluated.

    A view that is `complete` will see no further columns, so what is worked out over all its rows may be
    kept and read row by row.
    """

    knowledge: Knowledge
    scope: Scope
    rows: int
    joint_of: Ints
    columns: MutableMapping[str, Column]
    spread: MutableMapping[str, Column] = field(default_factory=dict)
    complete: bool = False
    kept: MutableMapping[Hashable, object] = field(default_factory=dict)

    def once(self, key: Hashable, work: Callable[[], T]) -> T:
        """The result of `work`, done only once on a complete view."""
        if not self.complete:
            return work()
        if key not in self.kept:
            self.kept[key] = work()
        return cast(T, self.kept[key])

    @cached_property
    def all_true(self) -> Bools:
        """A column of true, shared by every condition."""
        return np.ones(self.rows, np.bool_)

    @cached_property
    def starts(self) -> Ints:
        """For every joint the row of its first member (`joint_of` rises)."""
        return np.flatnonzero(np.diff(self.joint_of, prepend=-1))

    def column(self, quantity: str) -> Column:
        """The quantity's column over this scope's rows; absent throughout where nothing gives it."""
        if quantity in self.spread:
            return self.spread[quantity]
        about = self.knowledge.quantities[quantity]
        column = self.columns.get(quantity)
        if column is None:
            return absent_numbers(self.rows) if about.is_number else absent_levels(self.rows)
        if about.of == self.scope:
            return column
        assert self.scope == "member", f"a rule for joints reads {quantity}, a quantity of members"
        self.spread[quantity] = column.take(self.joint_of)
        return self.spread[quantity]

    @cached_property
    def members(self) -> View:
        """The members' view beside a view of joints."""
        return View(self.knowledge, "member", len(self.joint_of), self.joint_of, self.columns, complete=self.complete)

    def member_number(self, row: int) -> int:
        """The member's number within its joint, from 1; 0 for a joint."""
        if self.scope == "joint":
            return 0
        return int(row - self.starts[self.joint_of[row]]) + 1
