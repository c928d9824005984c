"""Hulls of formulas over boxes: never too narrow, exact where claimed, and no wider than need be."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from test_formula_points import PUBLISHED, WITHIN, formulas
from weldbasis.formula import parse_formula, range_over, slopes, value_at
from weldbasis.formula.parse import Formula
from weldbasis.formula.sets import Ranges
from weldbasis.values import Bools, Floats

Ends = Mapping[str, Floats]
INF = np.inf
SAMPLES = 300


def one_box(text: str, **ends: tuple[float, float]) -> Ranges:
    lows = {name: np.array([float(low)]) for name, (low, _) in ends.items()}
    return range_over(parse_formula(text), lows, {name: np.array([float(high)]) for name, (_, high) in ends.items()})


def boxes_within(rng: np.random.Generator, names: tuple[str, ...], rows: int) -> tuple[Ends, Ends]:
    """Random boxes of the inputs of published formulas; about a third of the ends fall together."""
    lows, highs = {}, {}
    for name in names:
        ends = np.sort(rng.uniform(*WITHIN[name], (2, rows)), axis=0)
        lows[name], highs[name] = ends[0], np.where(rng.random(rows) < 0.3, ends[0], ends[1])
    return lows, highs


def sampled(rng: np.random.Generator, low: Floats, high: Floats) -> Floats:
    """Points of every box, rows × samples: often an end, sometimes zero or near it, where formulas break."""
    from_low = np.where(np.isfinite(low), low, np.where(np.isfinite(high), high - 40, -20))
    to_high = np.where(np.isfinite(high), high, from_low + 40)
    share = rng.random((len(low), SAMPLES))
    share = np.where(rng.random(share.shape) < 0.4, np.round(share), share)
    points = from_low[:, None] + (to_high - from_low)[:, None] * share
    points = np.where(share == 1, to_high[:, None], points)
    near_zero = points * 10.0 ** -rng.integers(1, 6, points.shape) * (rng.random(points.shape) < 0.5)
    inside = (near_zero >= from_low[:, None]) & (near_zero <= to_high[:, None]) & (rng.random(points.shape) < 0.15)
    return np.where(inside, near_zero, points)


def values_in(formula: Formula, rng: np.random.Generator, lows: Ends, highs: Ends) -> Floats:
    """Values at points of every box, rows × samples."""
    points = {n: sampled(rng, lows[n], highs[n]).ravel() for n in formula.names}
    return value_at(formula, points).reshape(-1, SAMPLES)


def assert_holds(hull: Ranges, values: Floats) -> None:
    """Every value lies in its row's hull, no row with values is without hull, none that claims a value lacks one."""
    plain = np.isfinite(values) & (np.abs(values) < 1e12)
    size = np.abs(np.where(plain, values, 0.0)).max(axis=1)
    slack = 1e-9 * np.maximum(1.0, size)[:, None]
    inside = (values >= hull.low[:, None] - slack) & (values <= hull.high[:, None] + slack)
    assert (inside | ~plain).all()
    assert not (hull.defined[:, None] & np.isnan(values)).any()


def random_boxes(rng: np.random.Generator, names: tuple[str, ...], rows: int, endless: bool) -> tuple[Ends, Ends]:
    lows, highs = {}, {}
    for name in names:
        low = np.where(rng.random(rows) < 0.3, np.round(rng.uniform(-4, 4, rows)), rng.uniform(-4, 4, rows))
        low = np.where(rng.random(rows) < 0.2, np.abs(low), np.where(rng.random(rows) < 0.1, 0.0, low))
        high = low + rng.choice([0.0, 0.01, 0.5, 3.0, 10.0], rows)
        if endless:
            low = np.where(rng.random(rows) < 0.2, -INF, low)
            high = np.where(rng.random(rows) < 0.2, INF, high)
        lows[name], highs[name] = low, high
    return lows, highs


@given(text=formulas(), seed=st.integers(0, 2**32 - 1), endless=st.booleans())
@settings(max_examples=250, deadline=None)
def test_no_value_escapes_the_hull(text: str, seed: int, endless: bool) -> None:
    """For any formula and any box, also without end."""
    formula = parse_formula(text)
    if not formula.names:
        return
    rng = np.random.default_rng(seed)
    lows, highs = random_boxes(rng, formula.names, 5, endless)
    assert_holds(range_over(formula, lows, highs), values_in(formula, rng, lows, highs))


@given(text=formulas(depth=2), seed=st.integers(0, 2**32 - 1))
@settings(max_examples=150, deadline=None)
def test_slopes_hold_every_difference(text: str, seed: int) -> None:
    """Where the formula has a value along the way, every secant along a name lies between its slopes."""
    formula = parse_formula(text)
    if not formula.names or "round_up" in text:
        return
    rng = np.random.default_rng(seed)
    lows, highs = random_boxes(rng, formula.names, 12, endless=False)
    found, whole = slopes(formula, lows, highs), range_over(formula, lows, highs).defined
    at = {n: rng.uniform(lows[n], highs[n]) for n in formula.names}
    for name in formula.names:
        step = highs[name] - lows[name]
        first = value_at(formula, {**at, name: lows[name]})
        second = value_at(formula, {**at, name: highs[name]})
        plain = whole & (step > 0.4) & (np.abs(first) < 1e6) & (np.abs(second) < 1e6)
        rise = np.where(plain, (second - first) / np.where(plain, step, 1), 0)
        noise = 1e-7 * np.maximum(1, np.abs(rise))
        low, high = found[name]
        assert ((rise >= low - noise) & (rise <= high + noise) | ~plain).all()


@pytest.mark.parametrize("name", PUBLISHED)
def test_published_hulls_are_sound_exact_and_reached(name: str) -> None:
    """Every hull of a published formula is proved exact, and dense sampling comes within 1 % of it."""
    formula = parse_formula(PUBLISHED[name])
    rng = np.random.default_rng(7)
    lows, highs = boxes_within(rng, formula.names, 80)
    hull = range_over(formula, lows, highs)
    seen = np.hstack([values_in(formula, rng, lows, highs) for _ in range(12)])
    assert_holds(hull, seen)
    whole = ~np.isnan(seen).any(axis=1)
    assert (hull.defined == whole).all()
    assert hull.exact[whole].mean() >= 0.98
    if len(formula.names) <= 5:  # with more names, few random points meet the corners
        reached = np.nanmax(seen, axis=1) - np.nanmin(seen, axis=1)
        assert (hull.high - hull.low <= reached * 1.01 + 1e-9)[whole].mean() >= 0.98


KNOWN: list[tuple[str, dict[str, tuple[float, float]], tuple[float, float], bool, bool]] = [
    ("x**2", {"x": (-1, 2)}, (0, 4), True, True),
    ("x**3", {"x": (-1, 2)}, (-1, 8), True, True),
    ("x**2", {"x": (-3, -2)}, (4, 9), True, True),
    ("x**-2", {"x": (-2, -1)}, (0.25, 1), True, True),
    ("x*x", {"x": (-1, 2)}, (0, 4), True, True),
    ("x - x", {"x": (-1, 2)}, (0, 0), True, True),
    ("x*(1 - x)", {"x": (0, 1)}, (0, 0.25), True, True),
    ("x/(1 + x)", {"x": (1, 3)}, (0.5, 0.75), True, True),
    ("x*y/(x + y)", {"x": (1, 2), "y": (1, 4)}, (0.5, 4 / 3), True, True),
    ("x**4 - 2*x**2", {"x": (-2, 2)}, (-1, 8), True, True),
    ("exp(-x*x)", {"x": (-1, 2)}, (np.exp(-4), 1), True, True),
    ("abs(x)", {"x": (-3, 2)}, (0, 3), True, True),
    ("max(x, 1 - x)", {"x": (0, 1)}, (0.5, 1), True, True),
    ("min(x, y, 2)", {"x": (0, 5), "y": (1, 3)}, (0, 2), True, True),
    ("round_up(x, 5)", {"x": (101, 112)}, (105, 115), True, True),
    ("round_up(x, y)", {"x": (0, 7), "y": (4, 1e12)}, (0, 1e12 + 7), False, True),
    ("round_up(x, 5) - x", {"x": (101, 104)}, (1, 4), False, True),
    ("2**x", {"x": (-1, 3)}, (0.5, 8), True, True),
    ("x**y", {"x": (2, 3), "y": (-1, 2)}, (1 / 3, 9), True, True),
    ("x**0", {"x": (-1, 2)}, (1, 1), True, True),
    ("0*x + 3", {"x": (-1, 2)}, (3, 3), True, True),
    ("x + 1", {"x": (0, INF)}, (1, INF), False, True),
    ("tanh(x/35)", {"x": (0, INF)}, (0, 1), True, True),
    ("697*C - 1/d", {"C": (0.2, 0.5), "d": (10, INF)}, (139.3, 348.5), True, True),
    ("x**2", {"x": (-INF, INF)}, (0, INF), False, True),
    ("x/y", {"x": (0, INF), "y": (1, INF)}, (0, INF), False, True),
    ("sqrt(x)", {"x": (-1, 4)}, (0, 2), False, False),
    ("log(x)", {"x": (0, 1)}, (-INF, 0), False, False),
    ("log10(x)", {"x": (-5, 100)}, (-INF, 2), False, False),
    ("x**0.35", {"x": (-1, 1)}, (0, 1), False, False),
    ("1/x", {"x": (0, 2)}, (0.5, INF), False, False),
    ("1/x", {"x": (-1, 2)}, (-INF, INF), False, False),
    ("x**-2", {"x": (-1, 2)}, (0.25, INF), False, False),
    ("1/(0*x)", {"x": (1, 2)}, (np.nan, np.nan), False, False),
    ("sqrt(x)", {"x": (-4, -1)}, (np.nan, np.nan), False, False),
    ("log(x)", {"x": (-1, 0)}, (np.nan, np.nan), False, False),
    ("x**y", {"x": (-2, 0), "y": (1, 2)}, (np.nan, np.nan), False, False),
    ("x + sqrt(-1)", {"x": (0, 1)}, (np.nan, np.nan), False, False),
    ("round_up(x, 0)", {"x": (0, 1)}, (np.nan, np.nan), False, False),
    ("atan(1/x)", {"x": (0, 1)}, (np.pi / 4, np.pi / 2), False, False),
]


@pytest.mark.parametrize(("text", "ends", "expected", "exact", "defined"), KNOWN)
def test_known_hulls(
    text: str, ends: dict[str, tuple[float, float]], expected: tuple[float, float], exact: bool, defined: bool
) -> None:
    found = one_box(text, **ends)
    assert found.low[0] == pytest.approx(expected[0], rel=1e-4, abs=1e-4, nan_ok=True)
    assert found.high[0] == pytest.approx(expected[1], rel=1e-4, abs=1e-4, nan_ok=True)
    assert not exact or found.exact[0]
    assert found.defined[0] == defined


def test_a_hull_that_cannot_be_proved_is_safe_and_says_so() -> None:
    """The least value lies all along a diagonal, where no bound of a piece meets it."""
    found = one_box("(x + y)**2 - 4*x*y", x=(1, 2), y=(1, 2))
    assert -0.05 <= found.low[0] <= 0
    assert found.high[0] == pytest.approx(1)
    assert (found.exact[0], found.defined[0]) == (False, True)


def test_exact_is_only_said_of_the_hull_itself() -> None:
    """Along one name a dense walk meets the hull; where it falls short, the hull is not called exact."""
    texts = ["x*(1 - x)", "x**3 - x", "exp(-x)*x", "tanh(x) - x/2", "abs(x - 1)*x", "max(x, 2 - x*x)", "x/(1 + x*x)"]
    rng = np.random.default_rng(5)
    ends = np.sort(rng.uniform(-3, 3, (2, 200)), axis=0)
    for text in texts:
        formula = parse_formula(text)
        hull = range_over(formula, {"x": ends[0]}, {"x": ends[1]})
        walk = value_at(formula, {"x": (ends[0][:, None] + np.diff(ends, axis=0).T * np.linspace(0, 1, 4001)).ravel()})
        walk = walk.reshape(200, -1)
        close = 2e-3 * np.ptp(walk, axis=1) + 1e-9  # a kink may lie half a step of the walk away
        assert hull.exact.mean() > 0.95, text
        assert (np.abs(hull.low - walk.min(axis=1)) <= close)[hull.exact].all(), text
        assert (np.abs(hull.high - walk.max(axis=1)) <= close)[hull.exact].all(), text


def test_points_boxes_and_missing_rows_side_by_side() -> None:
    formula = parse_formula("sqrt(x)*y")
    lows = {"x": np.array([4.0, 4.0, np.nan, -1.0, 4.0]), "y": np.array([3.0, 3.0, 3.0, 3.0, 3.0])}
    highs = {"x": np.array([4.0, 9.0, np.nan, -1.0, 9.0]), "y": np.array([3.0, 5.0, 5.0, 3.0, np.nan])}
    found = range_over(formula, lows, highs)
    np.testing.assert_array_equal(found.low, [6, 6, np.nan, np.nan, np.nan])
    np.testing.assert_array_equal(found.high, [6, 15, np.nan, np.nan, np.nan])
    np.testing.assert_array_equal(found.exact, [True, True, False, False, False])
    np.testing.assert_array_equal(found.defined, [True, True, False, False, False])


def test_a_box_of_one_point_gives_the_plain_value() -> None:
    formula = parse_formula(PUBLISHED["preheat, cet"])
    rng = np.random.default_rng(2)
    points = {n: rng.uniform(*WITHIN[n], 50) for n in formula.names}
    found = range_over(formula, points, {n: p.copy() for n, p in points.items()})
    np.testing.assert_array_equal(found.low, value_at(formula, points))
    np.testing.assert_array_equal(found.high, found.low)
    assert (found.exact & found.defined).all()


def test_a_formula_without_names_is_one_row() -> None:
    found = range_over(parse_formula("2**0.5"), {}, {})
    assert (found.low[0], found.high[0], found.exact[0], found.defined[0]) == (2**0.5, 2**0.5, True, True)
    assert slopes(parse_formula("2"), {}, {}) == {}


@given(text=formulas(), seed=st.integers(0, 2**32 - 1))
@settings(max_examples=40, deadline=None)
def test_rows_do_not_touch_each_other(text: str, seed: int) -> None:
    formula = parse_formula(text)
    if not formula.names:
        return
    rng = np.random.default_rng(seed)
    lows, highs = random_boxes(rng, formula.names, 3, endless=False)
    together = range_over(formula, lows, highs)
    for row in range(3):
        alone = range_over(formula, *({n: e[row : row + 1] for n, e in ends.items()} for ends in (lows, highs)))
        for one, all_of_them in zip(vars(alone).values(), vars(together).values(), strict=True):
            np.testing.assert_array_equal(one[0], all_of_them[row])


def test_many_rows_are_worked_in_parts() -> None:
    """More rows than are searched at once, none of them monotone."""
    formula = parse_formula("x*(1 - x)*y")
    rng = np.random.default_rng(9)
    lows = {"x": rng.uniform(0, 0.4, 25_000), "y": rng.uniform(1, 2, 25_000)}
    highs = {"x": rng.uniform(0.6, 1, 25_000), "y": lows["y"] + 1}
    found = range_over(formula, lows, highs)
    np.testing.assert_allclose(found.high, highs["y"] / 4, rtol=1e-9)
    lesser = np.minimum(lows["x"] * (1 - lows["x"]), highs["x"] * (1 - highs["x"]))
    np.testing.assert_allclose(found.low, lesser * lows["y"], rtol=1e-9)
    assert found.exact.all()


def test_slopes_prove_directions() -> None:
    formula = parse_formula(PUBLISHED["preheat, cet"])
    lows = {n: np.array([WITHIN[n][0]]) for n in formula.names}
    found = slopes(formula, lows, {n: np.array([WITHIN[n][1]]) for n in formula.names})
    assert all(found[n][0][0] >= 0 for n in ("CET", "d", "HD"))
    assert found["Q"][1][0] <= 0
    assert found["CET"][0][0] == pytest.approx(697 + 53 * 0.5)
    assert found["CET"][1][0] == pytest.approx(697 + 53 * 4)


def test_the_share_of_tight_hulls() -> None:
    """Of random formulas over boxes where they have values, most hulls are within 1 % of a dense sample."""
    rng = np.random.default_rng(12)
    texts = ["x*y - x", "x**2 - 2*x*y", "(x - y)/(x + y + 9)", "tanh(x)*y + x", "x*exp(-abs(y))", "max(x, y)*min(x, 2)"]
    tight: list[Bools] = []
    for text in texts:
        formula = parse_formula(text)
        lows, highs = random_boxes(rng, formula.names, 100, endless=False)
        hull = range_over(formula, lows, highs)
        walk = np.stack([np.linspace(lows[n], highs[n], 61, axis=1) for n in formula.names])
        grid = np.stack(np.broadcast_arrays(walk[0][:, :, None], walk[1][:, None, :]))
        values = value_at(formula, {n: grid[at].ravel() for at, n in enumerate(formula.names)}).reshape(100, -1)
        whole = hull.defined & np.isfinite(values).all(axis=1)
        tight.append((hull.high - hull.low <= np.ptp(values, axis=1) * 1.01 + 1e-9)[whole])
    assert np.hstack(tight).mean() >= 0.95
