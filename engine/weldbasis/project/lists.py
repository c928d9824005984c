"""Weld lists and lists of certificates: the rows of CSV tables as the project file would write them."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from typing import Any

from weldbasis.problem import Place, Refused, nearest
from weldbasis.project.csv_tables import Row, Table, read_table
from weldbasis.project.reading import Path_, Reading, Written, shown_path
from weldbasis.project.steels import ELEMENTS

_PART_COLUMN = re.compile(r"([a-z]\w*?)[ _]([1-9]\d?)")
_CERTIFICATE_FIELDS = ("certificate", "heat", "title", "grade", "delivery", "yield_strength")
# Elements that certificates list and no rule reads.
_OTHER_ELEMENTS = ("Co", "W", "Sn", "As", "Sb", "Zr", "Pb")


def weld_list(reading: Reading, name: str, joint_fields: Iterable[str], member_fields: Iterable[str]) -> list[Written]:
    """Every joint of a weld list; a part's columns carry its number: "steel 1", "thickness 1", "steel 2", …"""
    table = _table(reading, name)
    if table is None:
        return []
    of_joint, of_member = sorted(joint_fields), sorted(member_fields)
    paths: dict[str, Path_] = {}
    for header, place in table.headers.items():
        part = _PART_COLUMN.fullmatch(header)
        if header in of_joint:
            paths[header] = (header,)
        elif part and part.group(1) in of_member:
            paths[header] = ("members", int(part.group(2)), part.group(1))
        else:
            why = f"each part has its own: {header} 1, {header} 2, …" if header in of_member else ""
            known = [*of_joint, *(f"{field} {part.group(2) if part else 1}" for field in of_member)]
            reading.fault(place, f"{header!r} is no column of a weld list", why, nearest(header, known))
    return [_joint(row, paths) for row in table.rows]


def _joint(row: Row, paths: Mapping[str, Path_]) -> Written:
    """A row as the project file would write a joint; empty cells are left out, units of headers put to numbers."""
    filled = {header: path for header, path in paths.items() if row.cells[header]}
    numbers = sorted({path[1] for path in filled.values() if len(path) > 1}, key=int)
    members: list[dict[str, Any]] = [{} for _ in numbers]
    data: dict[str, Any] = {"members": members}
    headers: dict[Path_, str] = {}
    for header, path in filled.items():
        if len(path) == 1:
            data[str(path[0])] = row.with_unit(header)
            headers[path] = header
        else:
            part = numbers.index(path[1])
            members[part][str(path[2])] = row.with_unit(header)
            headers["members", part, path[2]] = header
            headers.setdefault(("members", part), header)
    return Written(data, lambda *path: _cell_place(row, headers, path))


def _cell_place(row: Row, headers: Mapping[Path_, str], path: Path_) -> Place:
    """The place of the cell that a path stands for, or of the nearest part around it."""
    while path and path not in headers:
        path = path[:-1]
    return row.place(headers[path]) if path else row.place()


def certificate_list(reading: Reading, name: str) -> dict[str, Written] | None:
    """The certificates of a list by number, each as the project file would write a steel; None if it is unreadable."""
    table = _table(reading, name)
    if table is None:
        return None
    known = [*_CERTIFICATE_FIELDS, *ELEMENTS, *_OTHER_ELEMENTS]
    for header, place in table.headers.items():
        if header not in known:
            why = f"it holds {', '.join(_CERTIFICATE_FIELDS)} and elements by symbol"
            reading.fault(place, f"{header!r} is no column of a list of certificates", why, nearest(header, known))
    if "certificate" not in table.headers:
        reading.fault(Place(table.file), "no column is headed 'certificate'", "steels name their certificate by it")
        return None
    found: dict[str, Written] = {}
    for row in table.rows:
        number = row.cells["certificate"]
        place = row.place("certificate")
        if not number:
            reading.fault(place, "a certificate has no number", do="write its number")
        elif number in found:
            first = found[number].place_of("certificate")
            reading.fault(
                place, f"certificate {number!r} stands here twice", f"first in {first}", "take one of them out"
            )
        else:
            found[number] = _certificate(row)
    return found


def _certificate(row: Row) -> Written:
    """A row as the project file would write a steel."""
    symbols = [*ELEMENTS, *_OTHER_ELEMENTS]
    data: dict[str, Any] = {
        "composition": {name: row.with_unit(name) for name in row.cells if name in symbols and row.cells[name]},
        "origin": {name: row.cells[name] for name in ("certificate", "heat") if row.cells.get(name)},
    }
    for name in ("title", "grade", "delivery", "yield_strength"):
        if row.cells.get(name):
            data[name] = row.with_unit(name)
    return Written(data, lambda *path: row.place(str(path[-1]) if path else ""))


def _table(reading: Reading, name: str) -> Table | None:
    """A table beside the project, or None with its problems noted."""
    path = reading.folder / name
    try:
        table = read_table(path, shown_path(path))
    except Refused as refused:
        reading.problems += refused.problems
        return None
    reading.problems += table.problems
    return table
