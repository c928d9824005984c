"""What a look at a set of rules finds: one thing wrong or doubtful, its place, an example that shows it, the remedy."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from weldbasis.problem import Place

VetLevel = Literal["stop", "caution"]


@dataclass(frozen=True, order=True)
class VetFinding:
    """One thing wrong or doubtful in a set of rules; `stop` must be mended before it is used.

    `check` names the sort of finding, `example` the values that show it.
    """

    place: Place
    level: VetLevel
    check: str
    what: str
    do: str = ""
    example: str = ""

    def __str__(self) -> str:
        lines = [f"{self.place}: {self.level}: {self.what}"]
        lines += [f"    for example {self.example}"] if self.example else []
        lines += [f"    {self.do}"] if self.do else []
        return "\n".join(lines)


def point_text(values: Mapping[str, float | str]) -> str:
    """Values in words: "thickness = 30, restraint = high"."""
    return ", ".join(f"{name} = {_value_text(value)}" for name, value in values.items())


def _value_text(value: float | str) -> str:
    return value if isinstance(value, str) else f"{value:.6g}".replace("-", "−") if abs(value) < 1e6 else f"{value:.3g}"
