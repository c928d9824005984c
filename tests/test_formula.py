"""Formulas: what is refused, how they print, their values against mpmath, and sound, tight hulls over boxes."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from weldbasis.formula import (
    FormulaError,
    parse_comparison,
    parse_formula,
    range_over,
    show,
    slopes,
    symbolic,
    value_at,
)

REFUSED = [
    ("2^3", 2, "'^' is not a power here; write **"),
    ("sin(x)", 1, "there is no function 'sin'"),
    ("__import__('os')", 1, "there is no function '__import__'"),
    ("x.real", 1, "a dot cannot stand in a formula"),
    ("x[0]", 1, "a square bracket cannot stand in a formula"),
    ("(lambda: 1)()", 1, "only a function of the list can be called"),
    ("x if x else y", 1, "an 'if' cannot stand in a formula"),
    ("x < 3", 1, "a comparison cannot stand in a formula"),
    ("'a'", 1, "'a' is no number"),
    ("x +", 1, "this is no formula"),
    ("round_up(x)", 1, "round_up takes 2 arguments, here it has 1"),
    ("min(x, key=y)", 1, "min takes plain arguments, without names"),
    ("tanh + 1", 1, "tanh is a function; give it its arguments in brackets"),
    ("x // 2", 1, "this sign cannot stand in a formula"),
    ("True + 1", 1, "True is no number"),
    ("", 1, "this is no formula"),
    ("x × 2", 3, "'×' cannot stand in a formula"),
]
PUBLISHED = {
    "cet preheat (EN 1011-2 C.3)": "697*CET + 160*tanh(d/35) + 62*HD**0.35 + (53*CET - 32)*Q - 328",
    "cen (Yurioka 1983)": "C + (0.75 + 0.25*tanh(20*(C - 0.12)))*(Si/24 + Mn/6)",
    "t100 (Yurioka 1983)": "exp(67.6*CI**3 - 182.0*CI**2 + 163.8*CI - 41.0)",
    "hardness (Yurioka 1987)": "(HM + HB)/2 - (HM - HB)/2.2*atan(4*log10(t/tM)/log10(tB/tM) - 2)",
    "t8/5 thin (EN 1011-2 D)": "(4300 - 4.3*T0)*100000*Q**2/d**2*((1/(500 - T0))**2 - (1/(800 - T0))**2)",
    "seferian": "350*sqrt(Ct - 0.25)",
    "quenched end (ASTM A255)": "33.087 + 50.723*C + 33.662*C**2 - 2.7048*C**3 - 107.02*C**4 + 43.523*C**5",
}
WITHIN = {
    "CET": (0.2, 0.5),
    "d": (10, 90),
    "HD": (1, 20),
    "Q": (0.5, 4),
    "C": (0.02, 0.26),
    "Si": (0, 0.6),
    "Mn": (0.3, 1.8),
    "CI": (0.5, 0.8),
    "HM": (350, 500),
    "HB": (180, 300),
    "t": (2, 40),
    "tM": (0.3, 1.5),
    "tB": (45, 90),
    "T0": (0, 250),
    "Ct": (0.26, 0.9),
}


@pytest.mark.parametrize(("text", "column", "message"), REFUSED)
def test_refused_with_column_and_reason(text: str, column: int, message: str) -> None:
    with pytest.raises(FormulaError) as caught:
        parse_formula(text)
    assert message in str(caught.value)
    assert caught.value.column == column


@pytest.mark.parametrize("text", ["1+" * 1500 + "1", "(" * 300 + "1" + ")" * 300, "-" * 500 + "1"])
def test_over_long_and_over_deep_is_refused(text: str) -> None:
    with pytest.raises(FormulaError):
        parse_formula(text)


def test_comparison() -> None:
    found = parse_comparison("Tp <= Ti + 5")
    assert (found.left.names, found.sign, found.right.names) == (("Tp",), "<=", ("Ti",))
    with pytest.raises(FormulaError):
        parse_comparison("Tp == Ti")


PRINTS = [
    ("697*CET + 160*tanh(d/35)", {"CET": "0.36", "d": "40"}, "697 × 0.36 + 160 × tanh(40 / 35)"),
    ("(53*CET - 32)*Q", {"CET": "0.36", "Q": "0.9 to 1.4"}, "(53 × 0.36 − 32) × (0.9 to 1.4)"),
    ("62*HD**0.35", {"HD": "5"}, "62 × 5^0.35"),
    ("a - (b - c)", {"a": "1", "b": "2", "c": "3"}, "1 − (2 − 3)"),
    ("a/(b*c)", {"a": "1", "b": "−2", "c": "3"}, "1 / ((−2) × 3)"),
    ("(-x)**2", {"x": "3"}, "(−3)^2"),
    ("-x**2", {"x": "3"}, "−3^2"),
    ("a*-b", {"a": "1", "b": "2"}, "1 × (−2)"),
]


@pytest.mark.parametrize(("text", "figures", "expected"), PRINTS)
def test_prints_with_figures(text: str, figures: dict[str, str], expected: str) -> None:
    assert show(parse_formula(text), figures) == expected


def test_prints_with_names() -> None:
    assert symbolic(parse_formula("697*CET - 1.0e-3*d**2")) == "697 × CET − 1.0e-3 × d^2"


@pytest.mark.parametrize("name", PUBLISHED)
@given(data=st.data())
def test_values_agree_with_mpmath(name: str, data: st.DataObject) -> None:
    """Outside check: the same text evaluated by mpmath with 30 digits."""
    formula = parse_formula(PUBLISHED[name])
    point = {n: data.draw(st.floats(*WITHIN[n]), label=n) for n in formula.names}
    with mpmath.workdps(30):
        scope = {n: mpmath.mpf(v) for n, v in point.items()}
        expected = eval(PUBLISHED[name], {"__builtins__": {}}, {**vars(mpmath), **scope})  # our own constant text
    found = value_at(formula, {n: np.array([v]) for n, v in point.items()})[0]
    assert found == pytest.approx(float(expected), rel=1e-10, abs=1e-9)


@pytest.mark.parametrize("name", PUBLISHED)
def test_published_hulls_are_sound_and_tight(name: str) -> None:
    """Sampled values lie in the hull, and the hull is no wider than 1 % beyond a dense sample."""
    formula = parse_formula(PUBLISHED[name])
    rng = np.random.default_rng(7)
    rows, samples = 60, 3000
    lows, highs = {}, {}
    for n in formula.names:
        low, high = WITHIN[n]
        ends = np.sort(rng.uniform(low, high, (2, rows)), axis=0)
        lows[n], highs[n] = ends[0], ends[1]
    hull = range_over(formula, lows, highs)
    points = {n: _samples(rng, lows[n], highs[n], samples) for n in formula.names}
    values = value_at(formula, {n: p.ravel() for n, p in points.items()}).reshape(rows, samples)
    assert_sound(hull.low, hull.high, values)
    width = hull.high - hull.low
    seen = np.nanmax(values, axis=1) - np.nanmin(values, axis=1)
    assert hull.defined.all()
    assert np.mean(width <= seen * 1.01 + 1e-9) > 0.9


def _samples(rng: np.random.Generator, low: np.ndarray, high: np.ndarray, count: int) -> np.ndarray:
    """Random points, with both ends drawn often, so that corners are met."""
    share = rng.random((len(low), count))
    share = np.where(rng.random(share.shape) < 0.5, np.round(share), share)
    return np.asarray(low[:, None] + (high - low)[:, None] * share)


def assert_sound(low: np.ndarray, high: np.ndarray, values: np.ndarray) -> None:
    size = np.maximum(np.abs(low), np.abs(high))
    slack = 1e-9 * np.where(np.isfinite(size), np.maximum(1.0, size), 1.0)[:, None]
    inside = (values >= low[:, None] - slack) & (values <= high[:, None] + slack)
    assert (inside | ~np.isfinite(values)).all()


NAMES = ("x", "y", "z")


@st.composite
def formulas(draw: st.DrawFn, depth: int = 3) -> str:
    """Random formula text over three names, with every function and sign."""
    if depth == 0 or draw(st.integers(0, 5)) == 0:
        return draw(st.one_of(st.sampled_from(NAMES), st.floats(0.1, 9).map(lambda v: f"{v:.3g}")))
    part = formulas(depth=depth - 1)
    choice = draw(st.integers(0, 9))
    if choice <= 4:
        return f"({draw(part)} {draw(st.sampled_from('+-*/'))} {draw(part)})"
    if choice == 5:
        return f"({draw(part)})**{draw(st.sampled_from(['2', '3', '0.5', '-1']))}"
    if choice == 6:
        return f"{draw(st.sampled_from(['min', 'max']))}({draw(part)}, {draw(part)})"
    if choice == 7:
        return f"round_up({draw(part)}, 5)"
    function = draw(st.sampled_from(["sqrt", "exp", "log", "log10", "tanh", "atan", "abs"]))
    return f"{function}({draw(part)}/9)"


@given(text=formulas(), seed=st.integers(0, 2**32 - 1))
@settings(max_examples=150)
def test_random_formulas_are_sound(text: str, seed: int) -> None:
    """For any formula and any box, no sampled value escapes the hull."""
    formula = parse_formula(text)
    if not formula.names:
        return
    rng = np.random.default_rng(seed)
    rows, samples = 4, 300
    lows = {n: rng.uniform(-4, 4, rows) for n in formula.names}
    highs = {n: lows[n] + rng.uniform(0, 3, rows) * (rng.random(rows) > 0.3) for n in formula.names}
    hull = range_over(formula, lows, highs)
    points = {n: _samples(rng, lows[n], highs[n], samples) for n in formula.names}
    values = value_at(formula, {n: p.ravel() for n, p in points.items()}).reshape(rows, samples)
    some = np.isfinite(values).any(axis=1)
    assert np.isfinite(hull.low[some] + 0).all() or np.isinf(hull.low[some]).any() or np.isinf(hull.high[some]).any()
    big = np.abs(values) < 1e12
    assert_sound(hull.low, hull.high, np.where(big, values, np.nan))
    gaps = (~np.isfinite(values)).any(axis=1) & (np.abs(np.nan_to_num(values, posinf=0, neginf=0)) < 1e12).all(axis=1)
    assert not (hull.defined & gaps & np.isnan(values).any(axis=1)).any()


@given(text=formulas())
def test_print_reads_back(text: str) -> None:
    """What is printed with names reads back as a formula of the same value."""
    formula = parse_formula(text)
    back = parse_formula(symbolic(formula).replace("×", "*").replace("−", "-").replace("^", "**"))
    rng = np.random.default_rng(1)
    values = {n: rng.uniform(0.5, 3, 20) for n in NAMES}
    np.testing.assert_allclose(value_at(formula, values), value_at(back, values), rtol=1e-12)


def test_rounding_up_is_free_of_float_noise() -> None:
    formula = parse_formula("round_up(x, 5)")
    values = value_at(formula, {"x": np.array([110.0, 110.00000000001, 109.99999999999, 110.1, 0.1 + 0.2])})
    np.testing.assert_array_equal(values, [110, 110, 110, 115, 5])


def test_slopes_prove_directions() -> None:
    formula = parse_formula(PUBLISHED["cet preheat (EN 1011-2 C.3)"])
    found = slopes(
        formula,
        {n: np.array([WITHIN[n][0]]) for n in formula.names},
        {n: np.array([WITHIN[n][1]]) for n in formula.names},
    )
    assert all(found[n][0][0] >= 0 for n in ("CET", "d", "HD"))
    assert found["Q"][1][0] <= 0
