"""Units at the edges: text with a unit into numbers of the vocabulary's unit. Inside there are only floats."""

from __future__ import annotations

import math
import re
from functools import cache
from typing import TYPE_CHECKING

from weldbasis.ranges import Range

if TYPE_CHECKING:
    import pint

_NUMBER = r"[-+−]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?"
_QUANTITY = re.compile(rf"({_NUMBER})\s*(.*)", re.ASCII)
_SPAN = re.compile(rf"({_NUMBER})\s*([^\d\s.].*?)?\s*(?:(?i:to)|…|\.\.\.?|–)\s*({_NUMBER})\s*(.*)", re.ASCII)
_LARGEST = 1e30  # far above any measured number, and safe to convert
_HYPHEN_SPAN = re.compile(rf"\s*-\s*({_NUMBER}.*)", re.ASCII)
# What is handed to the unit library: names with small powers, nothing that could be worked out as arithmetic.
_FACTOR = r"(?:delta_)?[A-Za-zµμΩ]{1,20}(?:\*\*-?[1-4])?"
_UNIT_TEXT = re.compile(rf"{_FACTOR}(?: ?[*/ ] ?{_FACTOR}){{0,5}}")
_SPELLINGS = {
    "°c": "degC",
    "°f": "degF",
    "c": "degC",
    "f": "degF",
    "celsius": "degC",
    "fahrenheit": "degF",
    "kelvin": "K",
    "ml/100g": "mL/hg",
    "cm3/100g": "mL/hg",
    "n/mm2": "N/mm**2",
    "%": "percent",
    "wt%": "percent",
    "wt.%": "percent",
    "mass%": "percent",
    "hv10": "HV",
    "-": "",
    "inch": "in",
    "inches": "in",
    "in.": "in",
    '"': "in",
    "hr": "h",
    "hrs": "h",
    "hour": "h",
    "hours": "h",
    "sec": "s",
    "°c/h": "delta_degC/h",
    "degc/h": "delta_degC/h",
    "k/h": "delta_degC/h",
    "°f/h": "delta_degF/h",
    "degf/h": "delta_degF/h",
    "ipm": "in/min",
    "kgf/mm2": "kgf/mm**2",
    "kgf/mm/mm": "kgf/mm**2",
    "n/mm/mm": "N/mm**2",
    "mm2/s": "mm**2/s",
    "ft·lb": "ft*lbf",
}
# The units of the trade, so that the unit library, slow to load, is asked only about others:
# what they measure, and factor and offset to the first of that kind.
_COMMON: dict[str, tuple[str, float, float]] = {
    "mm": ("length", 1.0, 0.0),
    "cm": ("length", 10.0, 0.0),
    "m": ("length", 1000.0, 0.0),
    "in": ("length", 25.4, 0.0),
    "ft": ("length", 304.8, 0.0),
    "degC": ("temperature", 1.0, 0.0),
    "K": ("temperature", 1.0, -273.15),
    "degF": ("temperature", 5 / 9, -160 / 9),
    "kJ/mm": ("heat input", 1.0, 0.0),
    "J/mm": ("heat input", 0.001, 0.0),
    "kJ/cm": ("heat input", 0.1, 0.0),
    "kJ/m": ("heat input", 0.001, 0.0),
    "kJ/in": ("heat input", 1 / 25.4, 0.0),
    "MPa": ("stress", 1.0, 0.0),
    "N/mm**2": ("stress", 1.0, 0.0),
    "GPa": ("stress", 1000.0, 0.0),
    "kgf/mm**2": ("stress", 9.80665, 0.0),
    "mm/min": ("speed", 1.0, 0.0),
    "cm/min": ("speed", 10.0, 0.0),
    "m/min": ("speed", 1000.0, 0.0),
    "mm/s": ("speed", 60.0, 0.0),
    "cm/s": ("speed", 600.0, 0.0),
    "in/min": ("speed", 25.4, 0.0),
    "s": ("time", 1.0, 0.0),
    "min": ("time", 60.0, 0.0),
    "h": ("time", 3600.0, 0.0),
    "delta_degC/h": ("rate", 1.0, 0.0),
    "delta_degF/h": ("rate", 5 / 9, 0.0),
    "": ("share", 100.0, 0.0),
    "percent": ("share", 1.0, 0.0),
    "ppm": ("share", 0.0001, 0.0),
    "mL/hg": ("hydrogen", 1.0, 0.0),
    "HV": ("hardness", 1.0, 0.0),
    "V": ("voltage", 1.0, 0.0),
    "A": ("current", 1.0, 0.0),
}
_ANY_CASE = {spelling.lower(): spelling for spelling in _COMMON}
_KINDS = {
    "[mass]": "a mass",
    "[length]": "a length",
    "[length] ** 2": "an area",
    "[length] ** 3": "a volume",
    "[time]": "a time",
    "[temperature]": "a temperature",
    "[current]": "a current",
    "[length] / [time]": "a speed",
    "[length] * [mass] / [time] ** 2": "an energy per length",
    "[mass] * [length] / [time] ** 2": "an energy per length",
    "[mass] * [length] ** 2 / [time] ** 2": "an energy",
    "[length] ** 2 * [mass] / [time] ** 2": "an energy",
    "[mass] / [length] / [time] ** 2": "a stress",
    "[length] ** 2 * [mass] / [current] / [time] ** 3": "a voltage",
    "[mass] * [length] ** 2 / [time] ** 3 / [current]": "a voltage",
    "dimensionless": "a bare number",
    "[temperature] / [time]": "a heating or cooling rate",
    "[length] ** 3 / [mass]": "a volume per mass",
    "[hardness]": "a hardness",
}


@cache
def _registry() -> pint.UnitRegistry[float]:
    import pint  # noqa: PLC0415  (slow to load, and needed only for units outside the trade's own)

    registry: pint.UnitRegistry[float] = pint.UnitRegistry(autoconvert_offset_to_baseunit=True)
    registry.define("HV = [hardness]")
    registry.define("hg = 100 * gram")
    return registry


@cache
def _spelled(unit: str) -> str:
    """The spelling of this module for a unit as people write it; other units keep theirs."""
    plain = re.sub(r"\s+", " ", unit.strip()).replace("²", "**2").replace("³", "**3").replace("^", "**")
    squeezed = plain.replace(" ", "")
    if squeezed in _COMMON:
        return squeezed
    lowered = squeezed.replace("**", "").lower()
    return _SPELLINGS.get(lowered) or _ANY_CASE.get(squeezed.lower()) or ("" if lowered in ("", "-") else plain)


@cache
def _parsed(unit: str) -> pint.Unit:
    spelled = _spelled(unit)
    fault = ValueError(f"{_short(unit)} is no unit; write one like mm, kJ/mm, °C, mL/100g, MPa or %")
    if spelled not in _COMMON and not _UNIT_TEXT.fullmatch(spelled):
        raise fault
    try:
        return _registry().Unit(spelled)
    except Exception as cause:  # a unit is user text; the tokenizer of the unit library raises many kinds of error
        raise fault from cause


def _short(text: str) -> str:
    return repr(text if len(text) <= 40 else text[:39] + "…")


def is_unit(text: str) -> bool:
    """Whether the text names a unit; the empty text is the bare number."""
    if _spelled(text) in _COMMON:
        return True
    try:
        _parsed(text)
    except ValueError:
        return False
    return True


def same_spelling(one: str, other: str) -> bool:
    """Whether two texts spell the same unit, without asking the unit library."""
    return one == other or _spelled(one) == _spelled(other)


@cache
def conversion(unit_from: str, unit_to: str) -> tuple[float, float]:
    """Factor and offset so that value_to = factor × value_from + offset.

    Raises ValueError where the units measure different things.
    """
    if same_spelling(unit_from, unit_to):
        return 1.0, 0.0
    common, wanted = _COMMON.get(_spelled(unit_from)), _COMMON.get(_spelled(unit_to))
    if common and wanted and common[0] == wanted[0]:
        factor, zero = common[1] / wanted[1], (common[2] - wanted[2]) / wanted[1]
    else:
        factor, zero = _asked(unit_from, unit_to)
    # Conversions are decimal by definition, so the last bits are noise.
    return float(f"{factor:.14g}"), float(f"{zero:.12g}") if abs(zero) > 1e-12 else 0.0


def _asked(unit_from: str, unit_to: str) -> tuple[float, float]:
    """The conversion as the unit library has it."""
    source, target = _parsed(unit_from), _parsed(unit_to)
    if source.dimensionality != target.dimensionality:
        raise ValueError(f"{_short(unit_from)} is {_kind(source)}; {_kind(target)} in {unit_to or 'no unit'} is wanted")
    quantity = _registry().Quantity
    zero = float(quantity(0.0, source).to(target).magnitude)
    hundred = float(quantity(100.0, source).to(target).magnitude)
    return (hundred - zero) / 100.0, zero


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
        number = float(text) if abs(text) < _LARGEST else math.inf
        return _closed(number, number, f"{text:.6g}" if isinstance(text, float) else str(text))
    word = text.strip().replace("−", "-")
    if match := _SPAN.fullmatch(word):
        return _span(word, unit, *match.groups(""))
    if match := _QUANTITY.fullmatch(word):
        _refuse_other_spans(word, match.group(1), match.group(2))
        number = _converted(float(match.group(1)), match.group(2).strip(), unit)
        return _closed(number, number, word)
    if re.match(r"[-+]?\d+,\d", word):
        raise ValueError(f"{_short(text)} has a decimal comma; write a decimal point")
    wanted = f"a number in {unit}" if unit else "a number"
    raise ValueError(f"{_short(text)} is no number; {wanted} is wanted, with or without its unit, or a range 'a to b'")


def _span(word: str, unit: str, low: str, low_unit: str, high: str, high_unit: str) -> Range:
    if low_unit.strip() and not high_unit.strip():
        raise ValueError(f"{_short(word)} has a unit at its lower end only; write it behind the second number")
    first = _converted(float(low), (low_unit or high_unit).strip(), unit)
    second = _converted(float(high), high_unit.strip(), unit)
    if first > second:
        raise ValueError(f"{_short(word)} runs downwards; write the lower end first")
    return _closed(first, second, word)


def _refuse_other_spans(word: str, number: str, rest: str) -> None:
    """Ways to write ranges and fractions that would be misread."""
    if match := _HYPHEN_SPAN.fullmatch(rest):
        raise ValueError(f"{_short(word)} may mean a range; write '{number} to {match.group(1)}'")
    if re.match(r"\s*\d*\s*/\s*\d", rest):
        raise ValueError(f"{_short(word)} has a fraction; write it as a decimal, for example 1.25 in")


def _closed(low: float, high: float, text: str) -> Range:
    if not (abs(low) < _LARGEST and abs(high) < _LARGEST):
        raise ValueError(f"{_short(text)} is no number that can be measured")
    return Range(low, high)


def _converted(number: float, unit_from: str, unit_to: str) -> float:
    if unit_from.startswith(","):
        raise ValueError("a decimal comma stands here; write a decimal point")
    if not unit_from or same_spelling(unit_from, unit_to):
        return number
    factor, offset = conversion(unit_from, unit_to)
    return float(f"{factor * number + offset:.12g}")
