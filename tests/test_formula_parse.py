"""Formulas read: what is refused, with column and remedy; what a formula is once read; comparisons."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from weldbasis.formula import FormulaError, parse_comparison, parse_formula, value_at

REFUSED = [
    ("2^3", 2, "'^' is not a power here; write **"),
    ("  a ^ b", 5, "'^' is not a power here; write **"),
    ("sin(x)", 1, "there is no function 'sin'"),
    ("2 + squrt(x)", 5, "Did you mean 'sqrt'?"),
    ("roundup(x, 5)", 1, "Did you mean 'round_up'?"),
    ("__import__('os')", 1, "there is no function '__import__'"),
    ("1 + x.real", 5, "a dot cannot stand in a formula"),
    ("().__class__", 1, "a dot cannot stand in a formula"),
    ("x[0]", 1, "a square bracket cannot stand in a formula"),
    ("(lambda: 1)()", 1, "only a function of the list can be called"),
    ("sqrt(lambda: 1)", 6, "a lambda cannot stand in a formula"),
    ("x if x else y", 1, "an 'if' cannot stand in a formula"),
    ("x and y", 1, "'and' or 'or' cannot stand in a formula"),
    ("not x", 1, "this sign cannot stand in a formula"),
    ("x < 3", 1, "a comparison cannot stand in a formula"),
    ("(x := 3)", 2, "an assignment cannot stand in a formula"),
    ("x = 3", 3, "this is no formula"),
    ("x; y", 2, "this is no formula"),
    ("[x for x in y]", 1, "this cannot stand in a formula"),
    ("{x}", 1, "a set cannot stand in a formula"),
    ("'a'", 1, "'a' is no number"),
    ("f'{x}'", 1, "a text cannot stand in a formula"),
    ("x +", 1, "this is no formula"),
    ("", 1, "this is no formula"),
    ("   ", 1, "this is no formula"),
    ("round_up(x)", 1, "round_up takes 2 arguments, here it has 1"),
    ("sqrt(x, y)", 1, "sqrt takes 1 argument, here it has 2"),
    ("max(x)", 1, "max takes 2 or more arguments, here it has 1"),
    ("min(x, key=y)", 1, "min takes plain arguments, without names"),
    ("min(x, *y)", 8, "a star cannot stand in a formula"),
    ("tanh + 1", 1, "tanh is a function; give it its arguments in brackets"),
    ("x // 2", 1, "this sign cannot stand in a formula"),
    ("x % 2", 1, "this sign cannot stand in a formula"),
    ("x @ y", 1, "this sign cannot stand in a formula"),
    ("1 + +x", 5, "this sign cannot stand in a formula"),
    ("~x", 1, "this sign cannot stand in a formula"),
    ("True + 1", 1, "True is no number"),
    ("None", 1, "None is no number"),
    ("...", 1, "Ellipsis is no number"),
    ("2j * x", 1, "2j is no number"),
    ("0x10 + x", 1, "0x10 is no number of a formula; write it in plain decimals"),
    ("1_000*x", 1, "1_000 is no number of a formula; write it in plain decimals"),
    ("x + 1e999", 5, "this number is too large"),
    ("x + " + "9" * 400, 5, "this number is too large"),
    ("x # the rest", 3, "'#' cannot stand in a formula"),
    ("x + \\\n y", 5, "'\\\\' cannot stand in a formula"),
    ("x\x00", 2, "'\\x00' cannot stand in a formula"),
    ("x × 2", 3, "'×' cannot stand in a formula; write *"),
    ("5 − x", 3, "'−' cannot stand in a formula; write the plain -"),
    ("d²", 2, "'²' cannot stand in a formula; write **2"),
    ("2*ß", 3, "'ß' cannot stand in a formula; use plain letters"),
    ("0,35*x", 1, "a decimal point is a point"),
    ("697 CET", 5, "a sign is missing between '697' and 'CET'; to multiply, write *"),
    ("2x + 1", 2, "a sign is missing between '2' and 'x'; to multiply, write *"),
    ("(a + b) c", 9, "a sign is missing between ')' and 'c'; to multiply, write *"),
    ("53(CET - 32)", 1, "a sign is missing after 53; to multiply, write *"),
    ("sqrt(x", 5, "this bracket is never closed"),
    ("x + 1)", 6, "this bracket closes nothing"),
]


@pytest.mark.parametrize(("text", "column", "message"), REFUSED)
def test_refused_with_column_and_reason(text: str, column: int, message: str) -> None:
    with pytest.raises(FormulaError) as caught:
        parse_formula(text)
    assert message in str(caught.value)
    assert caught.value.column == column


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("1+" * 1001 + "1", "at most 2000 characters"),
        ("(" * 300 + "1" + ")" * 300, "nests too deeply"),
        ("-" * 500 + "1", "nests too deeply"),
        ("abs(" * 150 + "x" + ")" * 150, "nests too deeply"),
        ("2**" * 300 + "2", "nests too deeply"),
    ],
)
def test_over_long_and_over_deep_is_refused(text: str, message: str) -> None:
    with pytest.raises(FormulaError, match=message):
        parse_formula(text)


@pytest.mark.parametrize(
    "text", ["9**9**9**9", "2**" * 95 + "2", "10**10**10 - 10**10**10", "(1/0)**-1", "x*0 + 9**9**9"]
)
def test_huge_powers_are_harmless(text: str) -> None:
    """Everything is a float from the start: a tower of powers is infinite, or no number, at once."""
    formula = parse_formula(text)
    assert not np.isfinite(value_at(formula, {"x": np.ones(2)})).any()


def test_a_formula_is_a_frozen_value() -> None:
    formula = parse_formula("Mn/6 + C + Mn*C + (Cr + Mo)/5")
    assert formula.names == ("Mn", "C", "Cr", "Mo")
    assert formula == parse_formula(formula.text)
    assert hash(formula) == hash(parse_formula(formula.text))
    assert hash(formula.root) == hash(parse_formula(formula.text).root)
    assert formula != parse_formula("Mn/6 + C")
    with pytest.raises(dataclasses.FrozenInstanceError):
        formula.text = "C"  # type: ignore[misc]


@pytest.mark.parametrize("text", ["a + b\n  + c", "  a+b+c  ", "a +\tb + c", "+".join("abc")])
def test_spaces_and_line_ends_do_not_matter(text: str) -> None:
    ones = {name: np.ones(1) for name in "abc"}
    assert value_at(parse_formula(text), ones)[0] == 3


@pytest.mark.parametrize("sign", ["<=", "<", ">=", ">"])
def test_comparison(sign: str) -> None:
    found = parse_comparison(f" Tp {sign} Ti + 5")
    assert (found.left.names, found.sign, found.right.names) == (("Tp",), sign, ("Ti",))
    assert (found.left.text, found.right.text) == ("Tp", "Ti + 5")


@pytest.mark.parametrize(
    ("text", "column", "message"),
    [
        ("Tp == Ti", 4, "the sign of a comparison is <=, <, >= or >"),
        ("Tp is Ti", 4, "the sign of a comparison is <=, <, >= or >"),
        ("0 < Tp <= Ti", 11, "a comparison has two sides only"),
        ("Tp + Ti", 1, "a comparison has two sides and one of"),
        ("Tp ≤ Ti", 4, "'≤' cannot stand in a formula; write <="),
        ("Tp <= Ti.low", 7, "a dot cannot stand in a formula"),
        ("Tp <=", 1, "this is no formula"),
    ],
)
def test_refused_comparison(text: str, column: int, message: str) -> None:
    with pytest.raises(FormulaError) as caught:
        parse_comparison(text)
    assert message in str(caught.value)
    assert caught.value.column == column
