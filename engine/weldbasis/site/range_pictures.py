"""A steel's composition as ranges, with the values at which a decision turns and those at which a method ends."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from html import escape

from weldbasis.words import number_text

_WIDTH, _LEFT, _RIGHT, _ROW = 700.0, 46.0, 110.0, 40.0


@dataclass(frozen=True)
class Tick:
    """A value that matters: where a decision turns, or where a method leaves its limits; `words` say which."""

    value: float
    words: str
    turns: bool


@dataclass(frozen=True)
class RangeRow:
    """An element with what is known of it, mass %, and the values that matter inside."""

    symbol: str
    low: float
    high: float
    decimals: int
    ticks: tuple[Tick, ...]


def composition_ranges(title: str, rows: Sequence[RangeRow]) -> str:
    """One bar an element, each on its own scale from nothing to a little above what it may be."""
    parts = []
    for place, row in enumerate(rows):
        top = row.high * 1.12 or 1.0
        at = _ROW * place + 22

        def x(value: float, top: float = top) -> float:
            return _LEFT + value / top * (_WIDTH - _LEFT - _RIGHT)

        span = f"{number_text(row.low, row.decimals)} to {number_text(row.high, row.decimals)} %"
        parts.append(
            f'<text class="wb-word" x="{_LEFT - 8:.0f}" y="{at + 4:.0f}" text-anchor="end">{row.symbol}</text>'
        )
        parts.append(f'<line class="wb-grid" x1="{_LEFT}" x2="{_WIDTH - _RIGHT}" y1="{at:.0f}" y2="{at:.0f}"/>')
        parts.append(
            f'<line class="wb-dot-bar" x1="{x(row.low):.1f}" x2="{x(row.high):.1f}" y1="{at:.0f}" y2="{at:.0f}"/>'
        )
        parts.append(f'<text class="wb-tick" x="{_WIDTH - _RIGHT + 8:.0f}" y="{at + 4:.0f}">{span}</text>')
        taken: list[float] = []
        for tick in row.ticks:
            where = x(tick.value)
            style = "wb-line" if tick.turns else "wb-limit"
            words = f"<title>{escape(tick.words)}</title>"
            parts.append(
                f'<g>{words}<line class="{style}" x1="{where:.1f}" x2="{where:.1f}" y1="{at - 8:.0f}" '
                f'y2="{at + 8:.0f}"/></g>'
            )
            if all(abs(where - other) > 34 for other in taken):
                taken.append(where)
                label = number_text(tick.value, row.decimals)
                parts.append(
                    f'<text class="wb-tick" x="{where:.1f}" y="{at - 11:.0f}" text-anchor="middle">{label}</text>'
                )
    height = _ROW * len(rows) + 8
    return (
        f'<svg class="wb-picture" role="img" aria-label="{escape(title)}" viewBox="0 0 {_WIDTH:g} {height:g}" '
        f'xmlns="http://www.w3.org/2000/svg">{"".join(parts)}</svg>'
    )
