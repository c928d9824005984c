"""Analyses of several samples into what the steel may hold: tolerance bounds, laboratory uncertainty, outliers.

The method and its figures are knowledge (`kb/steels/sampling.yaml`); here is only its arithmetic.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import product

from weldbasis.knowledge import Sampling
from weldbasis.ranges import Range

_CORNERS = 10  # values up to which every corner of their own ranges is tried
_STEPS_APART = 2  # last figures that rounding alone may put between two values


@dataclass(frozen=True)
class Outlier:
    """A value that stands apart: the place of its sample from 1, the value, and how far it lies from the mean."""

    sample: int
    value: float
    deviations: float
    critical: float


def tolerance_bounds(values: Sequence[Range], last_figure: float, method: Sampling) -> Range:
    """Bounds that each hold for the method's share of the steel with its confidence; never inside the values.

    Source: one-sided tolerance interval of a normal population with unknown mean and spread (ISO 16269-6).
    A value that is itself a range counts at whichever end widens the bound.
    """
    factor = method.factor(len(values))
    least_spread = last_figure / math.sqrt(12.0)
    high = _highest([(value.low, value.high) for value in values], factor, least_spread)
    low = -_highest([(-value.high, -value.low) for value in values], factor, least_spread)
    return Range(max(0.0, min(low, *(value.low for value in values))), max(high, *(value.high for value in values)))


def _highest(ends: Sequence[tuple[float, float]], factor: float, least_spread: float) -> float:
    """Greatest mean + factor × spread over what the values may be; the sum is convex, so a corner holds it.

    For many values it is bounded by the triangle inequality of the spread instead.
    """
    if len(ends) <= _CORNERS:
        corners = product(*(sorted(set(pair)) for pair in ends))
        return max(_mean(corner) + factor * max(_spread(corner), least_spread) for corner in corners)
    middles = [(low + high) / 2 for low, high in ends]
    halves = [(high - low) / 2 for low, high in ends]
    more = math.sqrt(math.fsum(half * half for half in halves) / (len(ends) - 1))
    return _mean([high for _, high in ends]) + factor * max(_spread(middles) + more, least_spread)


def outlier_of(values: Sequence[tuple[int, Range]], last_figure: float, method: Sampling) -> Outlier | None:
    """The value that stands apart from the others, by its sample's place, if one does (Grubbs, two-sided).

    A value a step or two of the last figure from its neighbour never does: that is rounding.
    """
    critical = method.critical(len(values))
    middles = [(value.low + value.high) / 2 for _, value in values]
    if critical is None or not (spread := _spread(middles)):
        return None
    mean = _mean(middles)
    place = max(range(len(middles)), key=lambda at: (abs(middles[at] - mean), -at))
    gap = min(abs(middles[place] - other) for at, other in enumerate(middles) if at != place)
    deviations = abs(middles[place] - mean) / spread
    if deviations <= critical or gap <= _STEPS_APART * last_figure * (1 + 1e-9):
        return None
    return Outlier(values[place][0], middles[place], deviations, critical)


def outward(bounds: Range, decimals: int) -> Range:
    """Bounds rounded outward to so many decimals, so that what is printed is what counts."""
    step = 10.0**decimals
    low, high = math.floor(bounds.low * step + 1e-6) / step, math.ceil(bounds.high * step - 1e-6) / step
    return Range(min(low, bounds.low), max(high, bounds.high))


def _mean(values: Sequence[float]) -> float:
    return math.fsum(values) / len(values)


def _spread(values: Sequence[float]) -> float:
    """The standard deviation of a sample; nothing but rounding counts as none."""
    mean = _mean(values)
    found = math.sqrt(math.fsum((value - mean) ** 2 for value in values) / (len(values) - 1))
    return found if found > 1e-12 * abs(mean) else 0.0
