"""Preheat against thickness, a line a method, with published points over them; colours come from the style sheet."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from html import escape

import numpy as np

from weldbasis.values import Floats

_WIDTH, _PLOT_HEIGHT, _KEY_ROW = 760.0, 300.0, 19.0
_LEFT, _RIGHT, _TOP, _BOTTOM = 52.0, 14.0, 22.0, 40.0
_KEYS_A_ROW = 3
_STEP_MM, _STEP_C = 25, 50
_DASH = 3.0


@dataclass(frozen=True)
class Curve:
    """A method's values in °C over thickness; nan where it gives none. `style` is its place among the classes."""

    name: str
    style: int
    celsius: Floats


@dataclass(frozen=True)
class Point:
    """A published point: thickness in mm, preheat in °C, where it is printed."""

    thickness_mm: float
    celsius: float
    source: str


def method_curves(
    title: str,
    thickness_mm: Sequence[float],
    curves: Sequence[Curve],
    points: Sequence[Point],
    free_up_to_mm: float | None,
    top_c: float,
) -> str:
    """One steel's picture. `free_up_to_mm` marks the thickness a printed table lets go without preheat."""
    drawn = [curve for curve in curves if np.isfinite(curve.celsius).any()]
    rows = -(-len(drawn) // _KEYS_A_ROW) + bool(points) + (free_up_to_mm is not None)
    height = _PLOT_HEIGHT + rows * _KEY_ROW + 6
    most = max(thickness_mm)

    def x(thickness: float) -> float:
        return _LEFT + thickness / most * (_WIDTH - _LEFT - _RIGHT)

    def y(celsius: float) -> float:
        return _PLOT_HEIGHT - _BOTTOM - celsius / top_c * (_PLOT_HEIGHT - _TOP - _BOTTOM)

    parts = [_axes(x, y, most, top_c)]
    for curve in drawn:
        parts += _line(curve, thickness_mm, x, y, top_c)
    parts += [_ring(x(point.thickness_mm), y(point.celsius)) for point in points]
    if free_up_to_mm is not None and free_up_to_mm <= most:
        parts.append(_mark(x(free_up_to_mm), y(0.0)))
    parts.append(_key(drawn, points, free_up_to_mm))
    words = escape(title)
    return (
        f'<svg class="wb-picture" role="img" aria-label="{words}" viewBox="0 0 {_WIDTH:g} {height:g}" '
        f'xmlns="http://www.w3.org/2000/svg"><title>{words}</title>'
        f"<desc>{escape(_told(drawn, thickness_mm))}</desc>{''.join(parts)}</svg>"
    )


def _axes(x: Callable[[float], float], y: Callable[[float], float], most: float, top: float) -> str:
    parts = []
    for celsius in range(0, int(top) + 1, _STEP_C):
        at = y(celsius)
        parts.append(f'<line class="wb-grid" x1="{_LEFT:g}" x2="{_WIDTH - _RIGHT:g}" y1="{at:.1f}" y2="{at:.1f}"/>')
        parts.append(f'<text class="wb-tick" x="{_LEFT - 6:g}" y="{at + 4:.1f}" text-anchor="end">{celsius}</text>')
    for thickness in range(0, int(most) + 1, _STEP_MM):
        parts.append(
            f'<text class="wb-tick" x="{x(thickness):.1f}" y="{y(0) + 16:.1f}" text-anchor="middle">{thickness}</text>'
        )
    parts.append(f'<text class="wb-tick" x="{_LEFT - 6:g}" y="12" text-anchor="end">°C</text>')
    middle = (_LEFT + _WIDTH - _RIGHT) / 2
    parts.append(f'<text class="wb-tick" x="{middle:g}" y="{y(0) + 31:.1f}" text-anchor="middle">thickness, mm</text>')
    return "".join(parts)


def _line(
    curve: Curve, thickness: Sequence[float], x: Callable[[float], float], y: Callable[[float], float], top: float
) -> list[str]:
    """A line for every stretch of thickness over which the method gives values; a lone value is a short dash."""
    parts: list[str] = []
    run: list[tuple[float, float]] = []
    for mm, celsius in [*zip(thickness, curve.celsius, strict=True), (0.0, np.nan)]:
        if np.isfinite(celsius) and celsius <= top:
            run.append((x(mm), y(float(celsius))))
        elif run:
            ends = run if len(run) > 1 else [(run[0][0] - _DASH, run[0][1]), (run[0][0] + _DASH, run[0][1])]
            places = " ".join(f"{across:.1f},{down:.1f}" for across, down in ends)
            parts.append(f'<polyline class="wb-method wb-method-{curve.style}" points="{places}"/>')
            run = []
    return parts


def _ring(x: float, y: float) -> str:
    return f'<circle class="wb-published" cx="{x:.1f}" cy="{y:.1f}" r="4"/>'


def _mark(x: float, y: float) -> str:
    return f'<path class="wb-free" d="M{x:.1f},{y:.1f} l-5,-10 h10 z"/>'


def _key(curves: Sequence[Curve], points: Sequence[Point], free_up_to_mm: float | None) -> str:
    """The key under the picture: a sample of each line with its name."""
    samples = [
        (f'<line class="wb-method wb-method-{curve.style}" x1="0" x2="34" y1="0" y2="0"/>', curve.name)
        for curve in curves
    ]
    while len(samples) % _KEYS_A_ROW:
        samples.append(("", ""))
    whole_row = [("", "")] * (_KEYS_A_ROW - 1)  # published figures have long names
    if points:
        printed = f"printed in {' and '.join(sorted({point.source for point in points}))}"
        samples += [
            (_ring(17, 0), printed),
            *whole_row,
        ]
    if free_up_to_mm is not None:
        samples += [(_mark(17, 5), f"EN 1011-2, method A, prints no preheat up to {free_up_to_mm:g} mm"), *whole_row]
    parts = []
    for place, (sample, name) in enumerate(samples):
        if not name:
            continue
        across = _LEFT + place % _KEYS_A_ROW * (_WIDTH - _LEFT) / _KEYS_A_ROW
        down = _PLOT_HEIGHT + 6 + place // _KEYS_A_ROW * _KEY_ROW
        words = f'<text x="42" y="4">{escape(name)}</text>'
        parts.append(f'<g transform="translate({across:.0f},{down:.0f})">{sample}{words}</g>')
    return "".join(parts)


def _told(curves: Sequence[Curve], thickness: Sequence[float]) -> str:
    """The picture in words: each method from its first to its last thickness."""
    parts = []
    for curve in curves:
        inside = np.flatnonzero(np.isfinite(curve.celsius))
        first, last = int(inside[0]), int(inside[-1])
        ends = f"{curve.celsius[first]:.0f} °C at {thickness[first]:g} mm"
        if last != first:
            ends += f" to {curve.celsius[last]:.0f} °C at {thickness[last]:g} mm"
        parts.append(f"{curve.name}: {ends}")
    return "; ".join(parts) + "."
