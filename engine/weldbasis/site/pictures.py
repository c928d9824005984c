"""Pictures as SVG, drawn at build time: the thermal cycle of a joint, the methods side by side, a rule's neighbours.

Colours come from the page's style sheet by class, so that one drawing serves light, dark and print.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from html import escape

from weldbasis.trace import Candidate
from weldbasis.units import conversion

_WIDTH, _HEIGHT = 760, 250
_LEFT, _RIGHT, _TOP, _BOTTOM = 52, 52, 18, 34


@dataclass(frozen=True)
class Cycle:
    """The figures a thermal cycle is drawn from; each a range in °C or None where it is not decided."""

    ambient: tuple[float, float] | None
    preheat: tuple[float, float] | None
    interpass: tuple[float, float] | None
    release: tuple[float, float] | None
    release_hours: float | None
    treat_low: float | None
    treat_high: float | None
    treat_hours: float | None


def fahrenheit(celsius: float) -> float:
    """°C as °F."""
    factor, offset = conversion("degC", "degF")
    return factor * celsius + offset


def thermal_cycle(cycle: Cycle) -> str:
    """The joint's thermal cycle, time not to scale: welding between preheat and interpass limit, then what follows."""
    tops = [end for pair in (cycle.preheat, cycle.interpass, cycle.release) if pair for end in pair]
    tops += [end for end in (cycle.treat_low, cycle.treat_high) if end is not None]
    top = max([200.0, *tops]) * 1.12
    ground = cycle.ambient[0] if cycle.ambient else 15.0
    bottom = min(0.0, ground)

    def y(celsius: float) -> float:
        return _HEIGHT - _BOTTOM - (celsius - bottom) / (top - bottom) * (_HEIGHT - _TOP - _BOTTOM)

    parts = [_axis(y, bottom, top)]
    x, weld_end = _LEFT + 20.0, 0.0
    path = [(x, ground)]
    low = cycle.preheat[1] if cycle.preheat else ground
    high = cycle.interpass[0] if cycle.interpass else max(low + 60, 150.0)
    start, weld_end = x + 70, x + 300
    path.append((start, low))
    peaks = 4
    for run in range(peaks):
        left = start + (weld_end - start) * run / peaks
        right = start + (weld_end - start) * (run + 1) / peaks
        path += [(left + 10, max(high * 0.98, low)), (right, low + 2)]
    parts.append(_band(y, start, weld_end, cycle))
    at = weld_end
    if cycle.release:
        path += [(at + 25, cycle.release[0]), (at + 105, cycle.release[0])]
        hours = f", {cycle.release_hours:g} h" if cycle.release_hours else ""
        parts.append(_label(at + 65, y(cycle.release[0]) - 8, f"hydrogen release {cycle.release[0]:g} °C{hours}"))
        at += 110
    path.append((at + 45, ground))
    at += 60
    if cycle.treat_low is not None:
        hold = (cycle.treat_low + (cycle.treat_high or cycle.treat_low)) / 2
        path += [(at + 40, hold), (at + 110, hold), (at + 150, ground)]
        hours = f", {cycle.treat_hours:g} h" if cycle.treat_hours else ""
        span = f"{cycle.treat_low:g} to {cycle.treat_high:g}" if cycle.treat_high else f"{cycle.treat_low:g}"
        parts.append(_label(at + 75, y(hold) - 8, f"heat treatment {span} °C{hours}"))
    else:
        path.append((_WIDTH - _RIGHT - 10, ground))
    points = " ".join(f"{px:.1f},{y(celsius):.1f}" for px, celsius in path)
    parts.append(f'<polyline class="wb-line" points="{points}"/>')
    return svg("Thermal cycle of the joint, time not to scale", "".join(parts), _WIDTH, _HEIGHT)


def _axis(y: Callable[[float], float], bottom: float, top: float) -> str:
    step = 50 if top <= 330 else 100
    parts = []
    for tick in range(int(bottom // step) * step, int(top) + 1, step):
        if tick < bottom:
            continue
        at = y(float(tick))
        parts.append(f'<line class="wb-grid" x1="{_LEFT}" x2="{_WIDTH - _RIGHT}" y1="{at:.1f}" y2="{at:.1f}"/>')
        parts.append(f'<text class="wb-tick" x="{_LEFT - 6}" y="{at + 4:.1f}" text-anchor="end">{tick}</text>')
        parts.append(f'<text class="wb-tick" x="{_WIDTH - _RIGHT + 6}" y="{at + 4:.1f}">{fahrenheit(tick):.0f}</text>')
    parts.append(f'<text class="wb-tick" x="{_LEFT - 6}" y="12" text-anchor="end">°C</text>')
    parts.append(f'<text class="wb-tick" x="{_WIDTH - _RIGHT + 6}" y="12">°F</text>')
    return "".join(parts)


def _band(y: Callable[[float], float], start: float, end: float, cycle: Cycle) -> str:
    parts = []
    if cycle.preheat and cycle.interpass and cycle.preheat[1] <= cycle.interpass[0]:
        top, foot = y(cycle.interpass[0]), y(cycle.preheat[1])
        parts.append(
            f'<rect class="wb-band" x="{start}" y="{top:.1f}" width="{end - start}" height="{foot - top:.1f}"/>'
        )
    if cycle.preheat:
        at = y(cycle.preheat[1])
        easy = f" ({cycle.preheat[0]:g} at the easy end)" if cycle.preheat[0] != cycle.preheat[1] else ""
        parts.append(f'<line class="wb-limit" x1="{start}" x2="{end}" y1="{at:.1f}" y2="{at:.1f}"/>')
        words = f"at least {cycle.preheat[1]:g} °C / {fahrenheit(cycle.preheat[1]):.0f} °F{easy}"
        parts.append(_label((start + end) / 2, at + 16, words))
    if cycle.interpass:
        at = y(cycle.interpass[0])
        parts.append(f'<line class="wb-limit" x1="{start}" x2="{end}" y1="{at:.1f}" y2="{at:.1f}"/>')
        words = f"between runs at most {cycle.interpass[0]:g} °C / {fahrenheit(cycle.interpass[0]):.0f} °F"
        parts.append(_label((start + end) / 2, at - 6, words))
    return "".join(parts)


def _label(x: float, y: float, words: str) -> str:
    return f'<text class="wb-word" x="{x:.0f}" y="{y:.1f}" text-anchor="middle">{escape(words)}</text>'


def svg(title: str, inner: str, width: float, height: float) -> str:
    """A drawing with its title for those who listen."""
    return (
        f'<svg class="wb-picture" role="img" aria-label="{escape(title)}" viewBox="0 0 {width:g} {height:g}" '
        f'xmlns="http://www.w3.org/2000/svg"><title>{escape(title)}</title>{inner}</svg>'
    )


def method_strip(candidates: Sequence[tuple[str, Candidate]]) -> str:
    """All preheat methods on one scale: a dot or bar each, filled where it governs, hollow where only shown."""
    shown = [(name, c) for name, c in candidates if c.value.low is not None and c.value.high is not None]
    if not shown:
        return ""
    ends = [end for _, c in shown for end in (c.value.low or 0.0, c.value.high or 0.0)]
    least, most = min(0.0, *ends), max(100.0, *ends)
    width, row, left = 760.0, 22.0, 250.0

    def x(celsius: float) -> float:
        return left + (celsius - least) / (most - least) * (width - left - 80)

    height = row * len(shown) + 26
    parts = []
    for tick in range(int(least // 50) * 50, int(most) + 50, 50):
        if least <= tick <= most:
            parts.append(f'<line class="wb-grid" x1="{x(tick):.1f}" x2="{x(tick):.1f}" y1="4" y2="{height - 20:.0f}"/>')
            parts.append(
                f'<text class="wb-tick" x="{x(tick):.1f}" y="{height - 6:.0f}" text-anchor="middle">{tick} °C</text>'
            )
    for place, (name, candidate) in enumerate(shown):
        at = row * place + 14
        low, high = candidate.value.low or 0.0, candidate.value.high or 0.0
        style = "wb-dot" if candidate.governs else "wb-dot-hollow"
        parts.append(f'<text class="wb-word" x="{left - 10}" y="{at + 4:.0f}" text-anchor="end">{escape(name)}</text>')
        if high > low:
            parts.append(
                f'<line class="{style}-bar" x1="{x(low):.1f}" x2="{x(high):.1f}" y1="{at:.0f}" y2="{at:.0f}"/>'
            )
        parts.append(f'<circle class="{style}" cx="{x(high):.1f}" cy="{at:.0f}" r="4.5"/>')
        words = f"{low:.0f} to {high:.0f}" if round(low) != round(high) else f"{high:.0f}"
        parts.append(f'<text class="wb-tick" x="{x(high) + 9:.1f}" y="{at + 4:.0f}">{words}</text>')
    return svg("Preheat by every method that gives a value", "".join(parts), width, height)


def neighbours(title: str, above: Sequence[tuple[str, str]], below: Sequence[tuple[str, str]]) -> str:
    """A rule between what it reads and what it feeds; each neighbour is a link (words, address)."""
    rows = max(len(above), len(below), 1)
    row, width = 24.0, 760.0
    height = rows * row + 16
    middle = height / 2
    parts = [
        f'<rect class="wb-box" x="290" y="{middle - 15:.0f}" width="180" height="30" rx="4"/>',
        f'<text class="wb-word" x="380" y="{middle + 4:.0f}" text-anchor="middle">{escape(_short(title, 28))}</text>',
    ]
    for side, items in (("above", above), ("below", below)):
        for place, (words, address) in enumerate(items):
            at = middle + (place - (len(items) - 1) / 2) * row
            x, anchor, edge, door = (230, "end", 238, 290) if side == "above" else (530, "start", 470, 522)
            parts.append(
                f'<line class="wb-edge" x1="{edge}" x2="{door}" y1="{at if side == "above" else middle:.0f}" '
                f'y2="{middle if side == "above" else at:.0f}"/>'
            )
            parts.append(
                f'<a href="{escape(address)}"><text class="wb-link" x="{x}" y="{at + 4:.0f}" '
                f'text-anchor="{anchor}">{escape(_short(words, 36))}</text></a>'
            )
    return svg(f"What {title} reads and feeds", "".join(parts), width, height)


def _short(words: str, most: int) -> str:
    return words if len(words) <= most else words[: most - 1] + "…"
