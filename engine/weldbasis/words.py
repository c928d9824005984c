"""Values as a reader sees them: numbers, ranges, levels and units in words, the same on every page and screen."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from functools import lru_cache

from weldbasis.knowledge import Quantity

_UNIT_SIGNS = {"degC": "°C", "degF": "°F", "mL/100g": "mL/100 g", "degC/h": "°C/h", "N/mm**2": "N/mm²", "": ""}


def unit_text(unit: str) -> str:
    """A unit as printed: °C for degC and so on."""
    return _UNIT_SIGNS.get(unit, unit)


@lru_cache(maxsize=1 << 16)
def number_text(number: float, decimals: int) -> str:
    """A number with at most `decimals` decimals, without trailing zeros, with a true minus sign."""
    if math.isnan(number):
        return "none"
    if math.isinf(number):
        return "∞" if number > 0 else "−∞"
    text = f"{number:.{decimals}f}"
    if "." in text:
        text = text.rstrip("0").rstrip(".")
    if text in ("-0", "0") and number != 0 and decimals < 9:
        return f"{number:.2g}".replace("-", "−")
    return "0" if text == "-0" else text.replace("-", "−")


def range_text(low: float, high: float, decimals: int) -> str:
    """A range as "110 to 125", or one number where both ends print alike."""
    low_text, high_text = number_text(low, decimals), number_text(high, decimals)
    return low_text if low_text == high_text else f"{low_text} to {high_text}"


def level_titles(quantity: Quantity) -> Mapping[str, str]:
    """The printed words of a quantity's levels by their ids."""
    return {level.id: level.title for level in quantity.levels}


def levels_text(quantity: Quantity, levels: Iterable[str]) -> str:
    """Levels in words; all levels of the vocabulary together read "any of …" only up to six of them."""
    titles = level_titles(quantity)
    words = [titles.get(level, level) for level in levels]
    if len(words) > 6:
        return f"one of {len(words)} possible: {', '.join(words[:5])}, …"
    return " or ".join(words)


def with_unit(text: str, unit: str) -> str:
    """A figure and its unit, with a narrow no-break space where the unit takes one."""
    sign = unit_text(unit)
    if not sign:
        return text
    return f"{text} {sign}"


def places(values: int, one: str, many: str = "") -> str:
    """A count with its noun: "1 joint", "3 joints"."""
    return f"{values} {one if values == 1 else many or one + 's'}"


def counted(number: int, thing: str) -> str:
    """A number of things: "1 joint", "32 joints"."""
    return f"{number} {thing}" if number == 1 else f"{number} {thing}s"
