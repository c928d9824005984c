"""Weld lists and certificates from CSV beside a project: rows with the place of every cell."""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from weldbasis.problem import Place, Problem, Refused

_HEADER = re.compile(r"(.*?)\s*(?:\[(.+)\])?\s*")
_MEMBER = re.compile(r"(steel|thickness|continuous|member_thickness)[ _](\d+)")
_DECIMAL_COMMA = re.compile(r"-?\d+,\d+")


@dataclass(frozen=True)
class Row:
    """A row's cells by header, the unit each header names, and where the row stands."""

    cells: Mapping[str, str]
    units: Mapping[str, str]
    file: str
    line: int

    def place(self, header: str = "") -> Place:
        """The place of a cell; the column counts cells."""
        names = list(self.units)
        return Place(self.file, self.line, names.index(header) + 1 if header in names else 1)


def read_rows(path: Path, shown: str) -> list[Row]:
    """All rows of a CSV file with a header line. Raises Refused with what is wrong in it."""
    try:
        text = path.read_text(encoding="utf-8-sig")
    except (OSError, UnicodeDecodeError) as fault:
        reason = fault.strerror if isinstance(fault, OSError) else "this is not UTF-8 text"
        raise Refused(
            [Problem(Place(shown), f"cannot be read: {reason}", do="check the name; save it as UTF-8 CSV")]
        ) from fault
    delimiter = ";" if text.split("\n", 1)[0].count(";") > text.split("\n", 1)[0].count(",") else ","
    lines = list(csv.reader(io.StringIO(text), delimiter=delimiter))
    if not lines:
        raise Refused([Problem(Place(shown), "the file is empty", do="start it with a line of headers")])
    units = {}
    for column, title in enumerate(lines[0], start=1):
        match = _HEADER.fullmatch(title.strip())
        name, unit = (match.group(1), match.group(2) or "") if match else (title, "")
        if not name or name in units:
            what = "a header is empty" if not name else f"the header {name!r} stands here twice"
            raise Refused([Problem(Place(shown, 1, column), what, do="give every column a name of its own")])
        units[name] = unit
    return list(_rows(lines, units, shown))


def _rows(lines: list[list[str]], units: Mapping[str, str], shown: str) -> Iterator[Row]:
    problems = []
    for number, cells in enumerate(lines[1:], start=2):
        if not any(cell.strip() for cell in cells) or cells[0].lstrip().startswith("#"):
            continue
        if len(cells) != len(units):
            problems.append(
                Problem(
                    Place(shown, number),
                    f"{len(cells)} cells stand under {len(units)} headers",
                    do="check for a separator too many or too few; put text with separators in quotes",
                )
            )
            continue
        row = Row({name: cell.strip() for name, cell in zip(units, cells, strict=True)}, units, shown, number)
        problems += [
            Problem(row.place(name), f"{cell!r} has a decimal comma", do="write a decimal point")
            for name, cell in row.cells.items()
            if _DECIMAL_COMMA.fullmatch(cell)
        ]
        yield row
    if problems:
        raise Refused(problems)


def joint_from(row: Row) -> dict[str, Any]:
    """A joint as the project file would write it; empty cells are left out, units of headers are put to numbers."""
    joint: dict[str, Any] = {}
    members: dict[int, dict[str, Any]] = {}
    for name, cell in row.cells.items():
        if not cell:
            continue
        value = f"{cell} {row.units[name]}" if row.units[name] else cell
        if match := _MEMBER.fullmatch(name):
            members.setdefault(int(match.group(2)), {})[match.group(1)] = value
        else:
            joint[name] = value
    joint["members"] = [members[number] for number in sorted(members)]
    return joint


def certificate_from(row: Row) -> tuple[str, dict[str, Any]]:
    """A certificate's number, and its heat and composition as the project file would write a steel."""
    composition = {name: cell for name, cell in row.cells.items() if re.fullmatch(r"[A-Z][a-z]?", name) and cell}
    origin = {"certificate": row.cells.get("certificate", "")}
    if row.cells.get("heat"):
        origin["heat"] = row.cells["heat"]
    found: dict[str, Any] = {"composition": composition, "origin": origin}
    for field in ("grade", "yield_strength", "delivery"):
        if row.cells.get(field):
            unit = row.units[field]
            found[field] = f"{row.cells[field]} {unit}".strip()
    return row.cells.get("certificate", ""), found
