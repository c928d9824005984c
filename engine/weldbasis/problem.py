"""What is wrong, where, why and what to do: errors a user can cause, kept as values."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from difflib import get_close_matches


@dataclass(frozen=True, order=True)
class Place:
    """A point in a text file; line and column count from 1."""

    file: str
    line: int = 1
    column: int = 1

    def __str__(self) -> str:
        return f"{self.file}:{self.line}:{self.column}"


@dataclass(frozen=True, order=True)
class Problem:
    """One mistake: its place, what is wrong, why it matters, what to do, and the line it stands in."""

    place: Place
    what: str
    why: str = ""
    do: str = ""
    line_text: str = ""

    def __str__(self) -> str:
        lines = [f"{self.place}: {self.what}"]
        if self.line_text:
            pointer = " " * (self.place.column - 1) + "^"
            lines += [f"    {self.line_text}", f"    {pointer}"]
        lines += [f"    {text}" for text in (self.why, self.do) if text]
        return "\n".join(lines)


class Refused(Exception):
    """Input that cannot be used; carries every problem found, never only the first."""

    def __init__(self, problems: Iterable[Problem]) -> None:
        self.problems: tuple[Problem, ...] = tuple(sorted(problems))
        super().__init__("\n".join(str(problem) for problem in self.problems))


def nearest(word: str, known: Iterable[str]) -> str:
    """A sentence that offers the known word nearest to `word`, or lists a few where none is near."""
    words = sorted(set(known))
    close = get_close_matches(word.lower(), [w.lower() for w in words], n=1, cutoff=0.6)
    if close:
        match = next(w for w in words if w.lower() == close[0])
        return f"Did you mean {match!r}?"
    if not words:
        return ""
    shown = ", ".join(words[:12])
    return f"Known: {shown}{', …' if len(words) > 12 else ''}."
