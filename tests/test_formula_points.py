"""Formulas at points: published formulas against SymPy and worked figures, random ones against mpmath."""

from __future__ import annotations

from collections.abc import Mapping

import mpmath
import numpy as np
import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from weldbasis.formula import parse_formula, value_at

PUBLISHED = {
    "ce (IIW)": "C + Mn/6 + (Cr + Mo + V)/5 + (Ni + Cu)/15",
    "pcm (Ito and Bessyo)": "C + Si/30 + (Mn + Cu + Cr)/20 + Ni/60 + Mo/15 + V/10 + 5*B",
    "cet": "C + (Mn + Mo)/10 + (Cr + Cu)/20 + Ni/40",
    "cen (Yurioka 1983)": "C + (0.75 + 0.25*tanh(20*(C - 0.12)))"
    "*(Si/24 + Mn/6 + Cu/15 + Ni/20 + (Cr + Mo + Nb + V)/5 + 5*B)",
    "ce (structural code annex)": "C + (Mn + Si)/6 + (Cr + Mo + V)/5 + (Ni + Cu)/15",
    "preheat, cet": "697*CET + 160*tanh(d/35) + 62*HD**0.35 + (53*CET - 32)*Q - 328",
    "preheat, Pc": "1440*(Pcm + H/60 + h/600) - 392",
    "preheat, Pw": "1440*(Pcm + H/60 + K/40000) - 392",
    "preheat, Suzuki": "1600*(Pcm + 0.075*log10(H) + K/40000) - 408",
    "seferian, total carbon": "(360*C + 40*(Mn + Cr) + 20*Ni + 28*Mo)/360*(1 + 0.005*e)",
    "preheat, Seferian": "350*sqrt((360*C + 40*(Mn + Cr) + 20*Ni + 28*Mo)/360*(1 + 0.005*e) - 0.25)",
    "preheat, multi-run weld metal": "120 + 120*log10(H/3.5) + 5*(h - 20) + 8*(sB - 83)",
    "t100 (Yurioka 1983)": "exp(67.6*CI**3 - 182.0*CI**2 + 163.8*CI - 41.0)",
    "t8/5, thick": "(6700 - 5*T0)*Q*(1/(500 - T0) - 1/(800 - T0))",
    "t8/5, thin": "(4300 - 4.3*T0)*100000*Q**2/d**2*((1/(500 - T0))**2 - (1/(800 - T0))**2)",
    "t8/5, transition": "sqrt((4300 - 4.3*T0)*100000/(6700 - 5*T0)*Q*(1/(500 - T0) + 1/(800 - T0)))",
    "hardness (Yurioka 1987)": "(HM + HB)/2 - (HM - HB)/2.2*atan(4*log10(t/tM)/log10(tB/tM) - 2)",
    "hardness, martensite": "884*C*(1 - 0.3*C**2) + 294",
    "hardness, without martensite": "145 + 130*tanh(2.65*(C + Si/24 + Mn/5) - 0.69)",
    "quenched end (ASTM A255)": "33.087 + 50.723*C + 33.662*C**2 - 2.7048*C**3 - 107.02*C**4 + 43.523*C**5",
}
WITHIN = {
    "C": (0.05, 0.26),
    "Si": (0, 0.6),
    "Mn": (0.3, 1.8),
    "Cu": (0, 0.5),
    "Ni": (0, 1.2),
    "Cr": (0, 1.0),
    "Mo": (0, 0.5),
    "Nb": (0, 0.05),
    "V": (0, 0.1),
    "B": (0, 0.003),
    "CET": (0.2, 0.5),
    "Pcm": (0.15, 0.35),
    "d": (10, 90),
    "e": (5, 60),
    "h": (19, 50),
    "HD": (1, 20),
    "H": (1, 5),
    "K": (500, 3300),
    "sB": (60, 90),
    "Q": (0.5, 4),
    "CI": (0.5, 0.8),
    "T0": (0, 250),
    "HM": (350, 500),
    "HB": (180, 300),
    "t": (2, 40),
    "tM": (0.3, 1.5),
    "tB": (45, 90),
}


@pytest.mark.parametrize("name", PUBLISHED)
def test_published_values_agree_with_sympy(name: str) -> None:
    """Outside check: the same text read by sympy and evaluated with 30 digits."""
    formula = parse_formula(PUBLISHED[name])
    symbols = {n: sympy.Symbol(n) for n in formula.names}
    ten = {"log10": lambda x: sympy.log(x, 10)}
    other = sympy.sympify(PUBLISHED[name], locals={**symbols, **ten}, rational=True)
    rng = np.random.default_rng(3)
    low = {n: WITHIN[n][0] for n in formula.names}
    points = {n: low[n] + (WITHIN[n][1] - low[n]) * rng.random(12) for n in formula.names}
    points = {**points, "C": np.maximum(points["C"], 0.2)} if "Seferian" in name else points
    found = value_at(formula, points)
    for row, value in enumerate(found):
        exact = other.subs({symbols[n]: sympy.Float(points[n][row], 30) for n in formula.names}).evalf(30)
        assert value == pytest.approx(float(exact), rel=1e-11, abs=1e-10)


STEELS = {
    "s355-like": {"C": 0.16, "Si": 0.4, "Mn": 1.4},
    "tmcp-like": {"C": 0.06, "Si": 0.2, "Mn": 1.5, "Cu": 0.25, "Ni": 0.3, "Nb": 0.02, "V": 0.03},
    "ht780-like": {
        "C": 0.11,
        "Si": 0.26,
        "Mn": 0.85,
        "Cu": 0.25,
        "Ni": 0.95,
        "Cr": 0.5,
        "Mo": 0.45,
        "V": 0.04,
        "B": 0.0012,
    },
}
# Hand-worked figures: formula, inputs, value; the last digit is that of the table they were worked in.
WORKED: list[tuple[str, dict[str, float], float]] = [
    ("preheat, cet", {"CET": 0.25, "d": 20, "HD": 5, "Q": 1.0}, 19.0),
    ("preheat, cet", {"CET": 0.3, "d": 30, "HD": 5, "Q": 1.5}, 77.0),
    ("preheat, cet", {"CET": 0.33, "d": 40, "HD": 3, "Q": 1.0}, 109.0),
    ("preheat, cet", {"CET": 0.36, "d": 50, "HD": 5, "Q": 2.0}, 148.6),
    ("preheat, cet", {"CET": 0.4, "d": 30, "HD": 4, "Q": 1.0}, 151.9),
    ("preheat, cet", {"CET": 0.4, "d": 60, "HD": 5, "Q": 1.5}, 193.4),
    ("preheat, cet", {"CET": 0.3, "d": 15, "HD": 10, "Q": 1.0}, 68.5),
    ("preheat, cet", {"CET": 0.28, "d": 80, "HD": 15, "Q": 2.5}, 140.9),
    ("preheat, Pc", {"Pcm": 0.25, "H": 3, "h": 25}, 100.0),
    ("preheat, Pw", {"Pcm": 0.25, "H": 3, "K": 1725}, 102.1),
    ("preheat, Pc", {"Pcm": 0.3, "H": 3, "h": 50}, 232.0),
    ("preheat, Pw", {"Pcm": 0.3, "H": 3, "K": 3450}, 236.2),
    ("preheat, Pc", {"Pcm": 0.22, "H": 2, "h": 40}, 68.8),
    ("preheat, Pw", {"Pcm": 0.22, "H": 2, "K": 2760}, 72.2),
    ("preheat, Suzuki", {"Pcm": 0.25, "H": 3, "K": 1725}, 118.3),
    ("preheat, Suzuki", {"Pcm": 0.22, "H": 2, "K": 2760}, 90.5),
    ("seferian, total carbon", {"C": 0.18, "Mn": 1.4, "e": 25}, 0.3775),
    ("preheat, Seferian", {"C": 0.18, "Mn": 1.4, "e": 25}, 125.0),
    ("seferian, total carbon", {"C": 0.4, "Mn": 0.8, "Cr": 1.0, "Mo": 0.2, "e": 30}, 0.7079),
    ("preheat, Seferian", {"C": 0.4, "Mn": 0.8, "Cr": 1.0, "Mo": 0.2, "e": 30}, 236.8),
    ("preheat, multi-run weld metal", {"H": 3.5, "h": 20, "sB": 83}, 120.0),
    ("preheat, multi-run weld metal", {"H": 5, "h": 40, "sB": 83}, 238.6),
    ("preheat, multi-run weld metal", {"H": 2, "h": 30, "sB": 90}, 196.8),
    ("preheat, multi-run weld metal", {"H": 3.5, "h": 30, "sB": 70}, 66.0),
    ("t100 (Yurioka 1983)", {"CI": 0.5}, 47.0),
    ("t100 (Yurioka 1983)", {"CI": 0.6}, 579.2),
    ("t100 (Yurioka 1983)", {"CI": 0.7}, 2136.2),
    ("t100 (Yurioka 1983)", {"CI": 0.8}, 3537.6),
    ("t8/5, transition", {"T0": 20, "Q": 1}, 14.66),
    ("t8/5, thick", {"T0": 20, "Q": 1}, 5.29),
    ("t8/5, thin", {"T0": 20, "Q": 1, "d": 10}, 11.36),
    ("t8/5, thin", {"T0": 20, "Q": 1, "d": 20}, 2.84),
    ("t8/5, transition", {"T0": 100, "Q": 1.5}, 19.18),
    ("t8/5, thick", {"T0": 100, "Q": 1.5}, 9.96),
    ("t8/5, thin", {"T0": 100, "Q": 1.5, "d": 20}, 9.16),
    ("t8/5, transition", {"T0": 150, "Q": 2}, 23.24),
    ("t8/5, thick", {"T0": 150, "Q": 2}, 15.69),
    ("t8/5, thin", {"T0": 150, "Q": 2, "d": 25}, 13.56),
    ("t8/5, transition", {"T0": 20, "Q": 2}, 20.73),
    ("t8/5, thick", {"T0": 20, "Q": 2}, 10.58),
    ("t8/5, thin", {"T0": 20, "Q": 2, "d": 40}, 2.84),
    ("t8/5, transition", {"T0": 150, "Q": 1}, 16.43),
    ("t8/5, thick", {"T0": 150, "Q": 1}, 7.85),
    ("t8/5, thin", {"T0": 150, "Q": 1, "d": 12}, 14.71),
    ("t8/5, transition", {"T0": 200, "Q": 2.5}, 27.47),
    ("t8/5, thick", {"T0": 200, "Q": 2.5}, 23.75),
    ("t8/5, thin", {"T0": 200, "Q": 2.5, "d": 30}, 19.91),
    ("ce (IIW)", STEELS["s355-like"], 0.3933),
    ("pcm (Ito and Bessyo)", STEELS["s355-like"], 0.2433),
    ("cet", STEELS["s355-like"], 0.3),
    ("cen (Yurioka 1983)", STEELS["s355-like"], 0.389),
    ("ce (structural code annex)", STEELS["s355-like"], 0.46),
    ("ce (IIW)", STEELS["tmcp-like"], 0.3527),
    ("pcm (Ito and Bessyo)", STEELS["tmcp-like"], 0.1622),
    ("cet", STEELS["tmcp-like"], 0.23),
    ("cen (Yurioka 1983)", STEELS["tmcp-like"], 0.2225),
    ("ce (structural code annex)", STEELS["tmcp-like"], 0.386),
    ("ce (IIW)", STEELS["ht780-like"], 0.5297),
    ("pcm (Ito and Bessyo)", STEELS["ht780-like"], 0.2545),
    ("cet", STEELS["ht780-like"], 0.3012),
    ("cen (Yurioka 1983)", STEELS["ht780-like"], 0.4047),
    ("ce (structural code annex)", STEELS["ht780-like"], 0.573),
]


@pytest.mark.parametrize(("name", "inputs", "expected"), WORKED)
def test_worked_figures(name: str, inputs: Mapping[str, float], expected: float) -> None:
    """Agrees to the last digit of the worked figure."""
    formula = parse_formula(PUBLISHED[name])
    found = value_at(formula, {n: np.array([inputs.get(n, 0.0)]) for n in formula.names})[0]
    digits = len(str(expected).split(".")[1])
    assert found == pytest.approx(expected, abs=0.5001 * 10.0**-digits)


@pytest.mark.parametrize(("cooling", "expected"), [(3.0, 380.2), (6.0, 325.5), (10.0, 281.6), (20.0, 239.5)])
def test_worked_hardness(cooling: float, expected: float) -> None:
    """The hardness curve of Yurioka 1987 put together from its parts, for 0.16 C 0.40 Si 1.40 Mn."""
    steel = {n: np.array([v]) for n, v in STEELS["s355-like"].items()}
    parts = {
        "HM": PUBLISHED["hardness, martensite"],
        "HB": PUBLISHED["hardness, without martensite"],
        "tM": "exp(10.6*(C + Si/24 + Mn/6) - 4.8)",
        "tB": "exp(6.2*(C + Mn/3.6) + 0.74)",
    }
    values = {n: value_at(parse_formula(text), steel) for n, text in parts.items()}
    found = value_at(parse_formula(PUBLISHED["hardness (Yurioka 1987)"]), {**values, "t": np.array([cooling])})[0]
    assert found == pytest.approx(expected, abs=0.05001)


@pytest.mark.parametrize(
    ("text", "x"),
    [
        ("sqrt(x)", -1.0),
        ("log(x)", 0.0),
        ("log10(x)", -2.0),
        ("1/x", 0.0),
        ("x**-1", 0.0),
        ("x**-0.5", 0.0),
        ("x**0.35", -1.0),
        ("x**(1/3)", -8.0),
        ("2 + 0*(1/x)", 0.0),
        ("atan(1/x)", 0.0),
        ("exp(-1/abs(x))", 0.0),
        ("min(3, 1/x)", 0.0),
        ("1/(1/x)", 0.0),
        ("tanh(log(x))", 0.0),
        ("max(x, sqrt(-1 - x))", 1.0),
        ("x**x", 0.0),
        ("x**(x + 4)", -2.0),
        ("round_up(x, 0)", 3.0),
        ("round_up(7, x)", -5.0),
        ("x/0", 1.0),
        ("x**0", np.nan),
    ],
)
def test_outside_the_domain_there_is_no_value(text: str, x: float) -> None:
    """Also where NumPy would carry an infinity on to a finite end."""
    found = value_at(parse_formula(text), {"x": np.array([x, 1.5])})
    assert np.isnan(found[0])


@pytest.mark.parametrize(
    ("text", "x", "expected"),
    [
        ("-x**2", 3.0, -9.0),
        ("(-x)**2", 3.0, 9.0),
        ("2**3**2", 0.0, 512.0),
        ("x**0", 0.0, 1.0),
        ("x**3", -2.0, -8.0),
        ("x**-3", -2.0, -0.125),
        ("x**7", -2.0, -128.0),
        ("x**16", 2.0, 65536.0),
        ("x**1", 5.0, 5.0),
        ("x**(4/2)", -3.0, 9.0),
        ("min(x, 2, -1, 4)", 0.0, -1.0),
        ("max(x, 2, -1, 4)", 0.0, 4.0),
        ("8 - 4 - 2", 0.0, 2.0),
        ("8/4/2", 0.0, 1.0),
        ("1.0e-3*x", 2.0, 0.002),
        ("--x", 2.0, 2.0),
    ],
)
def test_ordinary_arithmetic(text: str, x: float, expected: float) -> None:
    assert value_at(parse_formula(text), {"x": np.array([x])}) == pytest.approx(expected, rel=1e-15)


def test_rounding_up_is_free_of_float_noise() -> None:
    formula = parse_formula("round_up(x, step)")
    x = np.array([110.0, 110.00000001, 109.99999999999, 110.1, 0.1 + 0.2, -3.0, 0.0, 1e15])
    step = np.array([5.0, 5.0, 5.0, 5.0, 0.1, 5.0, 5.0, 5.0])
    found = value_at(formula, {"x": x, "step": step})
    np.testing.assert_allclose(found, [110, 110, 110, 115, 0.3, 0, 0, 1e15], rtol=1e-15)
    assert not np.signbit(found[5])


@given(x=st.floats(-1e6, 1e6), step=st.floats(1e-3, 1e3))
def test_rounding_up_gives_the_least_multiple(x: float, step: float) -> None:
    found = float(value_at(parse_formula("round_up(x, step)"), {"x": np.array([x]), "step": np.array([step])})[0])
    noise = 2e-9 * max(abs(x), step)
    assert found / step == pytest.approx(round(found / step), abs=1e-6)
    assert x - noise <= found < x + step + noise


NAMES = ("x", "y", "z")


@st.composite
def formulas(draw: st.DrawFn, depth: int = 3) -> str:
    """Random formula text over three names, with every function and sign of the grammar."""
    if depth == 0 or draw(st.integers(0, 6)) == 0:
        number = st.floats(0.1, 9).map(lambda v: f"{v:.3g}") | st.sampled_from(["0", "1", "2"])
        return draw(st.sampled_from(NAMES) | number)
    part = formulas(depth=depth - 1)
    choice = draw(st.integers(0, 12))
    if choice <= 5:
        return f"({draw(part)} {draw(st.sampled_from('+-*/'))} {draw(part)})"
    if choice == 6:
        return f"({draw(part)})**{draw(st.sampled_from(['2', '3', '0.5', '-1', '-2', '1', '0', '(1/3)', '-1.5']))}"
    if choice == 7:
        return f"({draw(part)})**({draw(part)})"
    if choice == 8:
        return f"{draw(st.sampled_from(['min', 'max']))}({draw(part)}, {draw(part)})"
    if choice == 9:
        return f"round_up({draw(part)}, {draw(st.sampled_from(['5', '0.5', 'abs(x)']))})"
    if choice == 10:
        return f"-{draw(part)}"
    return f"{draw(st.sampled_from(['sqrt', 'exp', 'log', 'log10', 'tanh', 'atan', 'abs']))}({draw(part)})"


def _with_digits(text: str, point: Mapping[str, float], digits: int) -> float | None:
    """The same text by mpmath; None where it has no real value. The text is our own, never a user's."""
    with mpmath.workdps(digits):
        scope = {n: getattr(mpmath, n) for n in ("sqrt", "exp", "log", "log10", "tanh", "atan")}
        scope |= {"abs": abs, "min": min, "max": max, "round_up": lambda x, step: mpmath.ceil(x / step) * step}
        try:
            value = eval(text, {"__builtins__": {}}, {**scope, **{n: mpmath.mpf(v) for n, v in point.items()}})
            return float(value)
        except (ArithmeticError, ValueError, TypeError):
            return None


@given(text=formulas(), values=st.tuples(*[st.floats(-4, 4).map(lambda v: round(v, 3)) for _ in NAMES]))
@settings(max_examples=300, deadline=None)
def test_random_values_agree_with_mpmath(text: str, values: tuple[float, ...]) -> None:
    """Outside check, where the value does not hang on the last digits."""
    point = dict(zip(NAMES, values, strict=True))
    found = float(value_at(parse_formula(text), {n: np.array(v) for n, v in point.items()}))
    fine, rough = _with_digits(text, point, 40), _with_digits(text, point, 12)
    if np.isfinite(found) and fine is not None and rough is not None and "round_up" not in text:
        steady = abs(fine - rough) <= 1e-7 * max(1.0, abs(fine)) and abs(fine) < 1e100
        assert not steady or found == pytest.approx(fine, rel=1e-6, abs=1e-6)


@given(text=formulas(), seed=st.integers(0, 2**32 - 1))
@settings(max_examples=150, deadline=None)
def test_columns_are_left_as_they_were(text: str, seed: int) -> None:
    """A formula writes over what it made itself, never over its inputs, and shares no memory with them."""
    formula = parse_formula(text)
    rng = np.random.default_rng(seed)
    columns = {n: rng.uniform(-3, 3, 9) for n in NAMES}
    kept = {n: column.copy() for n, column in columns.items()}
    found = value_at(formula, columns)
    for n in NAMES:
        np.testing.assert_array_equal(columns[n], kept[n])
        assert not np.shares_memory(found, columns[n])
    rows = [value_at(formula, {n: column[row : row + 1] for n, column in columns.items()}) for row in range(9)]
    np.testing.assert_allclose(
        found, np.broadcast_to(np.hstack(rows) if formula.names else rows[0], found.shape), 1e-12
    )


@pytest.mark.parametrize("name", ["preheat, cet", "cen (Yurioka 1983)", "seferian, total carbon"])
def test_long_columns_are_worked_like_short_ones(name: str) -> None:
    formula = parse_formula(PUBLISHED[name])
    rng = np.random.default_rng(1)
    columns = {n: rng.uniform(*WITHIN[n], 100_003) for n in formula.names}
    parts = [value_at(formula, {n: c[at : at + 999] for n, c in columns.items()}) for at in range(0, 100_003, 999)]
    np.testing.assert_allclose(value_at(formula, columns), np.hstack(parts), rtol=1e-14)


def test_a_name_without_a_value_is_an_error() -> None:
    with pytest.raises(KeyError):
        value_at(parse_formula("x + y"), {"x": np.ones(2)})
