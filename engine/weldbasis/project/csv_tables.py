"""CSV tables beside a project: rows of cells, the unit each header names, and the place of every cell."""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from weldbasis.problem import Place, Problem, Refused

_HEADER = re.compile(r"(.*?)\s*(?:\[\s*(.*?)\s*\])?\s*")
_DECIMAL_COMMA = re.compile(r"[-+]?\d+,\d+")
# A number, a bound or a range without a unit of its own; only these take the unit of their header.
_BARE = re.compile(r"(?:<=|>=|<|>|≤|≥)?\s*[-+−]?[\d.]+(?:[eE][-+]?\d+)?(?:\s*(?:(?i:to)|…|\.\.\.?|–)\s*[-+−]?[\d.]+)?")


@dataclass(frozen=True)
class Row:
    """A row's cells by header, the unit of each header, and where the row stands; the last line is that of its end."""

    cells: Mapping[str, str]
    units: Mapping[str, str]
    file: str
    line: int

    def place(self, header: str = "") -> Place:
        """The place of a cell; the column counts cells, as a spreadsheet does."""
        names = list(self.units)
        return Place(self.file, self.line, names.index(header) + 1 if header in names else 1)

    def with_unit(self, header: str) -> str:
        """A cell, with the unit of its header where it is a number that carries none."""
        cell, unit = self.cells[header], self.units[header]
        return f"{cell} {unit}" if unit and _BARE.fullmatch(cell) else cell


@dataclass(frozen=True)
class Table:
    """A CSV file: the place of each header, all rows that can be read, and what is wrong in the others."""

    file: str
    headers: Mapping[str, Place]
    rows: tuple[Row, ...]
    problems: tuple[Problem, ...] = ()


def read_table(path: Path, shown: str) -> Table:
    """A CSV file with a header line; `shown` is its name in messages. Raises Refused where it is no table.

    The separator is a comma, a semicolon or a tab, whichever the header line has most of.
    """
    lines = _lines(_text(path, shown), shown)
    if not lines:
        raise Refused([Problem(Place(shown), "the file is empty", do="start it with a line of headers")])
    units = _headers(lines[0][1], shown)
    headers = {name: Place(shown, 1, column) for column, name in enumerate(units, start=1)}
    problems: list[Problem] = []
    rows = tuple(_rows(lines[1:], units, shown, problems))
    return Table(shown, headers, rows, tuple(problems))


def _text(path: Path, shown: str) -> str:
    try:
        return path.read_text(encoding="utf-8-sig")
    except OSError as fault:
        why, do = f"cannot be read: {fault.strerror}", "check the name; it counts from the project's folder"
    except UnicodeDecodeError:
        why, do = "this is not UTF-8 text", "save the table as CSV in UTF-8"
    raise Refused([Problem(Place(shown), why, do=do)])


def _lines(text: str, shown: str) -> list[tuple[int, list[str]]]:
    """Every line of cells with the number of the line it starts in."""
    first = text.split("\n", 1)[0]
    delimiter = max(",;\t", key=first.count)
    reader = csv.reader(io.StringIO(text, newline=None), delimiter=delimiter, strict=True)
    found, start = [], 1
    try:
        for cells in reader:
            found.append((start, cells))
            start = reader.line_num + 1
    except csv.Error as fault:
        what = f"this is no CSV: {fault}"
        raise Refused([Problem(Place(shown, start), what, do="check the quotes from here on")]) from fault
    return found


def _headers(cells: Sequence[str], shown: str) -> dict[str, str]:
    """Names and units of the columns. Empty headers at the end of the line are the leavings of a spreadsheet."""
    kept = list(cells)
    while kept and not kept[-1].strip():
        kept.pop()
    units: dict[str, str] = {}
    problems = []
    for column, title in enumerate(kept, start=1):
        match = _HEADER.fullmatch(title.strip())
        name, unit = (match.group(1), match.group(2) or "") if match else (title.strip(), "")
        if not name or name in units:
            what = f"the header {name!r} stands here twice" if name else "a header is empty"
            problems.append(Problem(Place(shown, 1, column), what, do="give every column a name of its own"))
        units[name] = unit
    if not units:
        problems.append(Problem(Place(shown), "the first line is empty", do="start the file with a line of headers"))
    if problems:
        raise Refused(problems)
    return units


def _rows(
    lines: Sequence[tuple[int, list[str]]], units: Mapping[str, str], shown: str, problems: list[Problem]
) -> Iterator[Row]:
    """The rows that can be read; mistakes in the others are added to `problems`."""
    for number, cells in lines:
        if not any(cell.strip() for cell in cells):
            continue
        if len(cells) < len(units) or any(cell.strip() for cell in cells[len(units) :]):
            problems.append(
                Problem(
                    Place(shown, number),
                    f"{len(cells)} cells stand under {len(units)} headers",
                    "a decimal comma or a comma in a text may have cut a cell in two",
                    "check for a separator too many or too few; put text with separators in quotes",
                )
            )
            continue
        row = Row({name: cell.strip() for name, cell in zip(units, cells, strict=False)}, units, shown, number)
        commas = [name for name, cell in row.cells.items() if _DECIMAL_COMMA.fullmatch(cell)]
        for name in commas:
            what = f"{row.cells[name]!r} has a decimal comma"
            problems.append(Problem(row.place(name), what, do="write a decimal point"))
        if not commas:
            yield row
