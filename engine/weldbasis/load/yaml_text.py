"""Strict YAML with positions: plain data, where every part of it stands, and the traps of YAML refused by name.

The text is read as a stream of events, so that nothing is ever built from tags, anchors or aliases.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, TypeAlias

import yaml

from weldbasis.load.traps import Trap, key_trap, plain_value
from weldbasis.problem import Place, Problem, Refused

Path_: TypeAlias = tuple[str | int, ...]

LARGEST_BYTES = 2 * 1024 * 1024
DEEPEST = 40

_Parser = getattr(yaml, "CSafeLoader", yaml.SafeLoader)
# Everything YAML takes for the end of a line, so that line numbers here are those of the parser.
_LINE_END = re.compile("\r\n|[\n\r\x85\u2028\u2029]")
_UNPRINTABLE = re.compile("[^\t\n\r -~\x85\xa0-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")
_LONGEST_SHOWN = 200


@dataclass(frozen=True)
class Document:
    """A file's data, its lines, and the place of every key and item by its path from the top."""

    file: str
    data: Any
    places: Mapping[Path_, Place] = field(repr=False)
    lines: tuple[str, ...] = field(repr=False)

    def place(self, *path: str | int) -> Place:
        """The place of a part, or of the nearest part around it."""
        while path not in self.places and path:
            path = path[:-1]
        return self.places.get(path, Place(self.file))

    def problem(self, path: Path_, what: str, why: str = "", do: str = "") -> Problem:
        """A problem at a part of the file, with its line."""
        return self.problem_at(self.place(*path), what, why, do)

    def problem_at(self, place: Place, what: str, why: str = "", do: str = "") -> Problem:
        """A problem at a place of the file, with its line."""
        return Problem(place, what, why, do, _line(self.lines, place))


def read_yaml(path: Path, shown: str = "") -> Document:
    """Read a file. `shown` is its name in messages. Raises Refused with every problem of the file."""
    name = shown or str(path)
    try:
        with path.open("rb") as file:
            data = file.read(LARGEST_BYTES + 1)
            size = path.stat().st_size
    except OSError as fault:
        raise Refused(
            [Problem(Place(name), f"cannot be read: {fault.strerror}", do="check the name and the rights")]
        ) from fault
    if len(data) > LARGEST_BYTES:
        raise Refused(
            [
                Problem(
                    Place(name),
                    f"the file has {size} bytes; at most {LARGEST_BYTES} are read",
                    "so large a file is no hand-kept knowledge",
                    "split it",
                )
            ]
        )
    return parse_yaml(data, name)


def parse_yaml(data: bytes, name: str) -> Document:
    """Read the bytes of a file as one mapping. Raises Refused with every problem found."""
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as fault:
        line = data[: fault.start].count(b"\n") + 1
        raise Refused([Problem(Place(name, line), "this is not UTF-8 text", do="save the file as UTF-8")]) from fault
    reader = _Reader(name, tuple(_LINE_END.split(text)))
    return reader.document(text)


def _line(lines: tuple[str, ...], place: Place) -> str:
    """The line of a place, or nothing where it is too long to help."""
    text = lines[place.line - 1] if 0 < place.line <= len(lines) else ""
    return text if len(text) <= _LONGEST_SHOWN else ""


class _Reader:
    """Builds data from parse events and collects problems on the way."""

    def __init__(self, name: str, lines: tuple[str, ...]) -> None:
        self.name = name
        self.lines = lines
        self.problems: list[Problem] = []
        self.places: dict[Path_, Place] = {}

    def document(self, text: str) -> Document:
        """The whole file."""
        data: Any = None
        self._refuse_unprintable(text)
        try:
            events = yaml.parse(text, Loader=_Parser)
            data = self._top(events)
        except yaml.MarkedYAMLError as fault:
            mark = fault.problem_mark or fault.context_mark
            place = Place(self.name, (mark.line if mark else 0) + 1, (mark.column if mark else 0) + 1)
            self.problems.append(self._problem(place, f"this is no YAML: {fault.problem}", do=self._syntax_help(place)))
        except yaml.YAMLError as fault:
            self.problems.append(Problem(Place(self.name), f"this is no YAML: {fault}"))
        if self.problems:
            raise Refused(self.problems)
        return Document(self.name, data, self.places, self.lines)

    def _refuse_unprintable(self, text: str) -> None:
        """Bytes that are no text, such as those of a damaged or a binary file, end the reading."""
        if match := _UNPRINTABLE.search(text):
            before = _LINE_END.split(text[: match.start()])
            place = Place(self.name, len(before), len(before[-1]) + 1)
            what = f"the character U+{ord(match.group()):04X} cannot stand in a file of text"
            # The line is not shown: a terminal might obey the character.
            raise Refused([Problem(place, what, do="take it out, or save the file as UTF-8 text again")])

    def _syntax_help(self, place: Place) -> str:
        line = self.lines[place.line - 1] if place.line <= len(self.lines) else ""
        if "\t" in line:
            return "indent with spaces; a tab cannot stand here"
        if line.count(": ") > 1 and '"' not in line:
            return "a text that holds ': ' goes in quotes"
        return "check the indentation, the quotes and the brackets just before this place"

    def _top(self, events: Iterator[Any]) -> Any:
        data: Any = None
        documents = 0
        for event in events:
            if isinstance(event, yaml.DocumentStartEvent):
                documents += 1
                if documents > 1:
                    self._add(event, "a second document starts here", "a file holds one document", "take '---' out")
                    return data
            elif isinstance(event, yaml.NodeEvent):
                if isinstance(event, yaml.ScalarEvent) and not event.value and not event.style:
                    continue
                data = self._value(event, events, (), 0)
                if not isinstance(event, yaml.MappingStartEvent):
                    self._add(
                        event,
                        "the file does not start with 'key: value' lines",
                        do="see the schema of this kind of file",
                    )
        if data is None and not self.problems:
            self.problems.append(Problem(Place(self.name), "the file is empty", do="write it, or take it away"))
        return data

    def _value(self, event: Any, events: Iterator[Any], path: Path_, depth: int) -> Any:
        if path not in self.places:
            self.places[path] = self._place(event)
        if isinstance(event, yaml.AliasEvent):
            self._add(
                event,
                f"'*{event.anchor}' repeats another part of the file",
                "aliases hide what a rule says and can blow a file up",
                "write the values out",
            )
            return None
        if event.anchor or event.tag is not None:
            self._refuse_marks(event)
        if isinstance(event, yaml.ScalarEvent):
            return self._scalar(event, path)
        if depth >= DEEPEST:
            self._add(event, f"this nests more than {DEEPEST} levels deep", do="flatten it")
            raise Refused(self.problems)
        if isinstance(event, yaml.SequenceStartEvent):
            return self._sequence(events, path, depth)
        return self._mapping(events, path, depth)

    def _refuse_marks(self, event: Any) -> None:
        if event.anchor:
            self._add(
                event, f"'&{event.anchor}' names a part for repeating", "aliases are not used here", "take it out"
            )
        if event.tag is not None:
            self._add(event, f"the tag {event.tag!r} cannot stand here", "files hold plain data only", "take it out")

    def _sequence(self, events: Iterator[Any], path: Path_, depth: int) -> list[Any]:
        found: list[Any] = []
        for event in events:
            if isinstance(event, yaml.SequenceEndEvent):
                break
            found.append(self._value(event, events, (*path, len(found)), depth + 1))
        return found

    def _mapping(self, events: Iterator[Any], path: Path_, depth: int) -> dict[str, Any]:
        found: dict[str, Any] = {}
        first: dict[str, Place] = {}
        for event in events:
            if isinstance(event, yaml.MappingEndEvent):
                break
            key = self._key(event, events, path, depth)
            place = self._place(event)
            self.places[(*path, key)] = place
            value = self._value(next(events), events, (*path, key), depth + 1)
            if key in first:
                self._add(
                    event,
                    f"{key!r} stands here twice; first in line {first[key].line}",
                    "of two equal keys one would silently win",
                    "keep one of them",
                )
            else:
                first[key] = place
                found[key] = value
        return found

    def _key(self, event: Any, events: Iterator[Any], path: Path_, depth: int) -> str:
        if not isinstance(event, yaml.ScalarEvent):
            self._add(event, "a key must be a plain word", do="write 'key: value'")
            self._value(event, events, (*path, "?"), depth + 1)
            return "?"
        if event.anchor or event.tag is not None:
            self._refuse_marks(event)
        if event.style == '"' and self._escapes(event):
            return "?"
        if event.implicit[0] and not event.style and (trap := key_trap(event.value)):
            self._add(event, *trap)
        return str(event.value)

    def _escapes(self, event: Any) -> bool:
        """Whether a quoted text writes by an escape what a file may not hold, such as a command to a terminal."""
        match = _UNPRINTABLE.search(event.value)
        if match:
            self._add(event, f"the character U+{ord(match.group()):04X} cannot stand in a text", do="take it out")
        return match is not None

    def _scalar(self, event: Any, path: Path_) -> Any:
        word: str = event.value
        if event.style == '"' and self._escapes(event):
            return "?"
        if event.style or not event.implicit[0]:
            return word
        value = plain_value(word)
        if not isinstance(value, Trap):
            return value
        if path and isinstance(path[-1], int) and not word.strip("~"):
            value = Trap("nothing stands at this point of the list", value.why, "write the value, or take the '-' out")
        self._add(event, *value)
        return word

    def _place(self, event: Any) -> Place:
        return Place(self.name, event.start_mark.line + 1, event.start_mark.column + 1)

    def _add(self, event: Any, what: str, why: str = "", do: str = "") -> None:
        self.problems.append(self._problem(self._place(event), what, why, do))

    def _problem(self, place: Place, what: str, why: str = "", do: str = "") -> Problem:
        return Problem(place, what, why, do, _line(self.lines, place))
