"""Units at the edges, against pint itself and against definitions."""

from __future__ import annotations

import pint
import pytest
from hypothesis import given
from hypothesis import strategies as st

from weldbasis.ranges import Range, parse_range
from weldbasis.units import _COMMON, conversion, is_unit, read_number

PINT: pint.UnitRegistry[float] = pint.UnitRegistry(autoconvert_offset_to_baseunit=True)
READ = [
    ("1.25 in", "mm", 31.75, 31.75),
    ("250 degF", "degC", 121.111111111, 121.111111111),
    ("35 kJ/in", "kJ/mm", 1.37795275591, 1.37795275591),
    ("0.9 to 1.4 kJ/mm", "kJ/mm", 0.9, 1.4),
    ("1 in to 2 in", "mm", 25.4, 50.8),
    (12, "mm", 12, 12),
    ("-5 °C", "degC", -5, -5),
    ("−5 °C", "degC", -5, -5),
    ("5 mL/100 g", "mL/100g", 5, 5),
    ("50 ksi", "MPa", 344.737864658, 344.737864658),
    ("30 ppm", "%", 0.003, 0.003),
    ("30 cm/min", "mm/min", 300, 300),
    ("0.5", "%", 0.5, 0.5),
    ("0.9...1.4 kJ/mm", "kJ/mm", 0.9, 1.4),
    ("25 ipm", "mm/min", 635, 635),
    ("100 °F/h", "degC/h", 55.5555555556, 55.5555555556),
    ("12 MM", "mm", 12, 12),
    ("0.2 wt.%", "%", 0.2, 0.2),
    ("5 mL/g", "mL/100g", 500, 500),
]
REFUSED = [
    ("5 kg", "mm", "'kg' is a mass; a length in mm is wanted"),
    ("5 blub", "mm", "'blub' is no unit; write one like mm, kJ/mm, °C, mL/100g, MPa or %"),
    ("0,9", "kJ/mm", "a decimal comma stands here; write a decimal point"),
    ("8 to 5 mm", "mm", "'8 to 5 mm' runs downwards; write the lower end first"),
    ("thick", "mm", "'thick' is no number; a number in mm is wanted, with or without its unit, or a range 'a to b'"),
    (True, "mm", "true is no number"),
    ("10-20 mm", "mm", "'10-20 mm' may mean a range; write '10 to 20 mm'"),
    ("1 1/4 in", "mm", "'1 1/4 in' has a fraction; write it as a decimal, for example 1.25 in"),
    ("1 in to 40", "mm", "'1 in to 40' has a unit at its lower end only; write it behind the second number"),
    ("1e999 mm", "mm", "'1e999 mm' is no number that can be measured"),
    ("350 HV", "MPa", "'HV' is a hardness; a stress in MPa is wanted"),
    # A unit is never worked out as arithmetic: this one would take for ever.
    ("5 9**9**9**9 mm", "mm", "'9**9**9**9 mm' is no unit; write one like mm, kJ/mm, °C, mL/100g, MPa or %"),
]


@pytest.mark.parametrize(("text", "unit", "low", "high"), READ)
def test_reads(text: str | float, unit: str, low: float, high: float) -> None:
    found = read_number(text, unit)
    assert found.low == pytest.approx(low, rel=1e-9)
    assert found.high == pytest.approx(high, rel=1e-9)


@pytest.mark.parametrize(("text", "unit", "message"), REFUSED)
def test_refuses_with_its_reason(text: str | float, unit: str, message: str) -> None:
    with pytest.raises(ValueError) as caught:  # noqa: PT011  (the whole text is compared below)
        read_number(text, unit)
    assert str(caught.value) == message


@pytest.mark.parametrize(
    ("ours", "theirs", "target", "their_target"),
    [
        ("degF", "degF", "degC", "degC"),
        ("in", "inch", "mm", "mm"),
        ("ksi", "ksi", "MPa", "MPa"),
        ("kJ/in", "kJ/inch", "kJ/mm", "kJ/mm"),
        ("kgf/mm**2", "kgf/mm**2", "MPa", "MPa"),
    ],
)
@given(number=st.floats(-1e3, 1e4))
def test_agrees_with_pint(ours: str, theirs: str, target: str, their_target: str, number: float) -> None:
    """Outside check: pint's own conversion."""
    factor, offset = conversion(ours, target)
    expected = PINT.Quantity(number, theirs).to(their_target).magnitude
    assert factor * number + offset == pytest.approx(expected, rel=1e-9, abs=1e-6)


@pytest.mark.parametrize("ours", sorted(set(_COMMON) - {"HV", "mL/hg"}))
def test_own_units_agree_with_pint(ours: str) -> None:
    """Outside check of every unit kept here so that pint need not be loaded."""
    first = next(name for name, (kind, factor, _) in _COMMON.items() if kind == _COMMON[ours][0] and factor == 1.0)
    expected = PINT.Quantity(37.0, ours).to(first).magnitude
    factor, offset = conversion(ours, first)
    assert factor * 37.0 + offset == pytest.approx(expected, rel=1e-11, abs=1e-9)


def test_known_units() -> None:
    assert all(is_unit(unit) for unit in ("", "mm", "%", "HV", "mL/100g", "degC/h", "N/mm**2", "s", "kJ/mm"))
    assert not is_unit("__import__('os')")


@pytest.mark.parametrize("text", ["[0.40, 0.45)", "(0, 40]", "<= 20", "> 38", "7", "[-5, -2]"])
def test_ranges_print_as_read(text: str) -> None:
    assert parse_range(str(parse_range(text))) == parse_range(text)


@given(st.floats(-1e3, 1e3), st.floats(0.001, 100), st.booleans(), st.booleans(), st.floats(-2e3, 2e3))
def test_range_holds_what_it_says(low: float, width: float, low_open: bool, high_open: bool, point: float) -> None:
    found = Range(low, low + width, low_open, high_open)
    expected = (point > low or (point == low and not low_open)) and (
        point < low + width or (point == low + width and not high_open)
    )
    assert found.holds(point) == expected


@pytest.mark.parametrize("text", ["[5, 2]", "(3, 3]", "about 5", "5 to", "[1, 2", True])
def test_no_range(text: str | bool) -> None:
    with pytest.raises(ValueError, match="range"):
        parse_range(text)
