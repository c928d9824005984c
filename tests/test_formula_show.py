"""A formula in print: figures put in, brackets where they are needed and only there, the author's spelling."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from test_formula_points import NAMES, PUBLISHED, formulas
from weldbasis.formula import parse_comparison, parse_formula, show, symbolic, value_at

CET = PUBLISHED["preheat, cet"]
PRINTS = [
    (
        CET,
        {"CET": "0.362", "d": "40", "HD": "5", "Q": "1.2"},
        "697 × 0.362 + 160 × tanh(40 / 35) + 62 × 5^0.35 + (53 × 0.362 − 32) × 1.2 − 328",
    ),
    (
        CET,
        {"CET": "0.36 to 0.39", "d": "40", "HD": "5", "Q": "1.2"},
        "697 × (0.36 to 0.39) + 160 × tanh(40 / 35) + 62 × 5^0.35 + (53 × (0.36 to 0.39) − 32) × 1.2 − 328",
    ),
    ("62*HD**0.35", {"HD": "3 to 5"}, "62 × (3 to 5)^0.35"),
    ("a - (b - c)", {"a": "1", "b": "2", "c": "3"}, "1 − (2 − 3)"),
    ("a - b - c", {"a": "1", "b": "2", "c": "3"}, "1 − 2 − 3"),
    ("a + (b + c)", {"a": "1", "b": "2", "c": "3"}, "1 + 2 + 3"),
    ("a/(b*c)", {"a": "1", "b": "−2", "c": "3"}, "1 / ((−2) × 3)"),
    ("a/b/c", {"a": "1", "b": "2", "c": "3"}, "1 / 2 / 3"),
    ("(a*b)/c", {"a": "1", "b": "2", "c": "3"}, "1 × 2 / 3"),
    ("(a + b)*c", {"a": "1", "b": "2", "c": "3"}, "(1 + 2) × 3"),
    ("(-x)**2", {"x": "3"}, "(−3)^2"),
    ("x**2", {"x": "-3"}, "(-3)^2"),
    ("x**2", {"x": "1e-5"}, "(1e-5)^2"),
    ("-x**2", {"x": "3"}, "−3^2"),
    ("a*-b", {"a": "1", "b": "2"}, "1 × (−2)"),
    ("a - -b", {"a": "1", "b": "2"}, "1 − (−2)"),
    ("--a", {"a": "1"}, "−(−1)"),
    ("-(a + b)", {"a": "1", "b": "2"}, "−(1 + 2)"),
    ("-a + b", {"a": "1", "b": "2"}, "−1 + 2"),
    ("(a**b)**c", {"a": "1", "b": "2", "c": "3"}, "(1^2)^3"),
    ("a**b**c", {"a": "1", "b": "2", "c": "3"}, "1^2^3"),
    ("a**(b + 1)", {"a": "1", "b": "2"}, "1^(2 + 1)"),
    ("a**-1", {"a": "4"}, "4^(−1)"),
    ("350*sqrt(Ct - 0.25)", {"Ct": "0.378"}, "350 × sqrt(0.378 − 0.25)"),
    ("min(a, max(b, c + 1))", {"a": "1", "b": "2 to 4", "c": "3"}, "min(1, max(2 to 4, 3 + 1))"),
    ("round_up(T, step)", {"T": "108 to 121", "step": "5"}, "round_up(108 to 121, 5)"),
    ("abs(-T)", {"T": "4"}, "abs(−4)"),
    ("a + b", {"a": "none"}, "none + b"),
    ("a", {"a": "0.36 to 0.39"}, "(0.36 to 0.39)"),
]


@pytest.mark.parametrize(("text", "figures", "expected"), PRINTS)
def test_prints_with_figures(text: str, figures: dict[str, str], expected: str) -> None:
    assert show(parse_formula(text), figures) == expected


@pytest.mark.parametrize("spelling", ["697", "0.35", "0.30", "182.0", "1.0e-3", "7.", ".5", "2E5"])
def test_numbers_keep_their_spelling(spelling: str) -> None:
    assert symbolic(parse_formula(f"  {spelling}*x\n + y")) == f"{spelling} × x + y"


def test_sides_of_a_comparison_print_apart() -> None:
    found = parse_comparison("2*Tp <= Ti + 5.0")
    assert (symbolic(found.left), show(found.right, {"Ti": "250"})) == ("2 × Tp", "250 + 5.0")


def plain(printed: str) -> str:
    return printed.replace("×", "*").replace("−", "-").replace("^", "**")


@given(text=formulas() | st.sampled_from(sorted(PUBLISHED.values())))
@settings(max_examples=150)
def test_a_print_reads_back(text: str) -> None:
    """What is printed with names is a formula of the same value, and prints the same again."""
    formula = parse_formula(text)
    back = parse_formula(plain(symbolic(formula)))
    assert symbolic(back) == symbolic(formula)
    assert back.names == formula.names
    rng = np.random.default_rng(1)
    values = {n: rng.uniform(0.5, 3, 20) for n in formula.names}
    found, again = value_at(formula, values), value_at(back, values)
    steady = ~(np.abs(found) > 1e9)
    np.testing.assert_allclose(found[steady], again[steady], rtol=1e-7, atol=1e-9)


@given(text=formulas())
def test_no_bracket_could_be_left_out(text: str) -> None:
    """Leaving out any pair that does not hold a function's arguments gives another formula, or none."""
    printed = symbolic(parse_formula(text))
    pairs, still_open = [], []
    for at, sign in enumerate(printed):
        if sign == "(":
            still_open.append(at)
        elif sign == ")":
            pairs.append((still_open.pop(), at))
    for start, end in pairs:
        if start and printed[start - 1].isalnum():
            continue
        without = printed[:start] + printed[start + 1 : end] + printed[end + 1 :]
        assert (
            "−−" in without
            or any(f"{sign} −" in without for sign in "+−×/")
            or "^−" in without
            or (symbolic(parse_formula(plain(without))) != printed)
        )


@given(figures=st.lists(st.floats(0, 1e3).map(lambda v: f"{v:.3f}"), min_size=3, max_size=3), text=formulas())
def test_the_print_with_figures_gives_the_value(figures: list[str], text: str) -> None:
    """A reader who works out the printed line gets the number that the engine got."""
    formula = parse_formula(text)
    put_in = dict(zip(NAMES, figures, strict=True))
    shown = parse_formula(plain(show(formula, put_in)))
    value = value_at(formula, {n: np.array(float(put_in[n])) for n in formula.names})
    assert not shown.names
    if "**" not in text:  # a power with figures in its exponent has a wider domain than one with names
        np.testing.assert_allclose(value_at(shown, {}), value, rtol=1e-9, atol=1e-9)
