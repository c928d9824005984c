"""Units at the edges: text with a unit into numbers of the vocabulary's unit. Inside there are only floats."""

from __future__ import annotations

import re
from functools import cache
from typing import TYPE_CHECKING

from weldbasis.ranges import Range

if TYPE_CHECKING:
    import pint

_NUMBER = r"[-+−]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?"
_QUANTITY = re.compile(rf"({_NUMBER})\s*(.*)")
_SPAN = re.compile(rf"({_NUMBER})\s*([^\d\s].*?)?\s*(?:to|…|\.\.\.?|–)\s*({_NUMBER})\s*(.*)")
_SPELLINGS = {
    "°c": "degC",
    "°f": "degF",
    "degc": "degC",
    "degf": "degF",
    "c": "degC",
    "f": "degF",
    "celsius": "degC",
    "ml/100g": "mL/hg",
    "n/mm2": "N/mm**2",
    "n/mm²": "N/mm**2",
    "mpa": "MPa",
    "%": "percent",
    "wt%": "percent",
    "wt %": "percent",
    "mass %": "percent",
    "hv": "HV",
    "hv10": "HV",
    "": "",
    "-": "",
    "inch": "in",
    '"': "in",
    "v": "V",
    "a": "A",
    "hr": "h",
    "hours": "h",
    "°c/h": "delta_degC/h",
    "degc/h": "delta_degC/h",
    "k/h": "kelvin/h",
    "°f/h": "delta_degF/h",
    "degf/h": "delta_degF/h",
    "kgf/mm2": "kgf/mm**2",
    "kgf/mm²": "kgf/mm**2",
    "kgf/mm/mm": "kgf/mm**2",
    "n/mm/mm": "N/mm**2",
    "mm2/s": "mm**2/s",
    "mm²/s": "mm**2/s",
    "ft·lb": "ft*lbf",
}
_KINDS = {
    "[mass]": "a mass",
    "[length]": "a length",
    "[time]": "a time",
    "[temperature]": "a temperature",
    "[current]": "a current",
    "[length] / [time]": "a speed",
    "[mass] * [length] / [time] ** 2": "an energy per length",
    "[mass] / [length] / [time] ** 2": "a stress",
    "dimensionless": "a bare number",
    "[temperature] / [time]": "a heating or cooling rate",
    "[length] ** 3 / [mass]": "a volume per mass",
}


@cache
def _registry() -> pint.UnitRegistry[float]:
    import pint  # noqa: PLC0415  (slow to load, and needed only where a unit is not the vocabulary's own)

    registry: pint.UnitRegistry[float] = pint.UnitRegistry(autoconvert_offset_to_baseunit=True)
    registry.define("HV = [hardness]")
    registry.define("hg = 100 * gram")
    return registry


def _pint_spelling(unit: str) -> str:
    plain = re.sub(r"\s+", " ", unit.strip())
    squeezed = plain.replace(" ", "").lower()
    return _SPELLINGS.get(plain.lower(), _SPELLINGS.get(squeezed, plain.replace("²", "**2").replace("³", "**3")))


@cache
def _parsed(unit: str) -> pint.Unit:
    import pint  # noqa: PLC0415

    try:
        return _registry().Unit(_pint_spelling(unit))
    except (pint.errors.PintError, ValueError, TypeError, AttributeError, SyntaxError, AssertionError) as fault:
        raise ValueError(f"{unit!r} is no unit; write one like mm, kJ/mm, °C, mL/100g, MPa or %") from fault
    except Exception as fault:  # a unit is user text; pint's tokenizer raises many kinds of error
        raise ValueError(f"{unit!r} is no unit; write one like mm, kJ/mm, °C, mL/100g, MPa or %") from fault


def is_unit(text: str) -> bool:
    """Whether the text names a unit; the empty text is the bare number."""
    try:
        _parsed(text)
    except ValueError:
        return False
    return True


def same_spelling(one: str, other: str) -> bool:
    """Whether two texts spell the same unit, without asking the unit library."""
    return one == other or _pint_spelling(one) == _pint_spelling(other)


@cache
def conversion(unit_from: str, unit_to: str) -> tuple[float, float]:
    """Factor and offset so that value_to = factor × value_from + offset.

    Raises ValueError where the units measure different things.
    """
    if same_spelling(unit_from, unit_to):
        return 1.0, 0.0
    source, target = _parsed(unit_from), _parsed(unit_to)
    if source.dimensionality != target.dimensionality:
        raise ValueError(f"{unit_from!r} is {_kind(source)}; {_kind(target)} in {unit_to or 'no unit'} is wanted")
    quantity = _registry().Quantity
    zero = float(quantity(0.0, source).to(target).magnitude)
    hundred = float(quantity(100.0, source).to(target).magnitude)
    factor = (hundred - zero) / 100.0
    # Conversions are decimal by definition, so the last bits of the difference are noise.
    return float(f"{factor:.14g}"), float(f"{zero:.12g}") if abs(zero) > 1e-12 else 0.0


def _kind(unit: pint.Unit) -> str:
    text = str(unit.dimensionality)
    return _KINDS.get(text, f"a quantity of {text}")


def read_number(text: str | float | int, unit: str) -> Range:
    """A number, a quantity with a unit or a range of either, as a closed range in `unit`.

    Reads 12, "1.25 in", "250 degF", "0.9 to 1.4 kJ/mm". Raises ValueError with a message fit for a user.
    """
    if isinstance(text, bool):
        raise ValueError(f"{str(text).lower()} is no number")
    if isinstance(text, int | float):
        return Range(float(text), float(text))
    word = text.strip().replace("−", "-")
    if match := _SPAN.fullmatch(word):
        low, low_unit, high, high_unit = match.groups()
        first = _converted(float(low), (low_unit or high_unit).strip(), unit)
        second = _converted(float(high), high_unit.strip(), unit)
        if first > second:
            raise ValueError(f"{text!r} runs downwards; write the lower end first")
        return Range(first, second)
    if match := _QUANTITY.fullmatch(word):
        number = _converted(float(match.group(1)), match.group(2).strip(), unit)
        return Range(number, number)
    if re.match(r"[-+]?\d+,\d", word):
        raise ValueError(f"{text!r} has a decimal comma; write a decimal point")
    wanted = f"a number in {unit}" if unit else "a number"
    raise ValueError(f"{text!r} is no number; {wanted} is wanted, with or without its unit, or a range 'a to b'")


def _converted(number: float, unit_from: str, unit_to: str) -> float:
    if "," in unit_from[:2] and unit_from[:1] == ",":
        raise ValueError("a decimal comma stands here; write a decimal point")
    if not unit_from or same_spelling(unit_from, unit_to):
        return number
    factor, offset = conversion(unit_from, unit_to)
    return float(f"{factor * number + offset:.12g}")
