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

from weldbasis.problem import Place, Problem, Refused

Path_: TypeAlias = tuple[str | int, ...]

LARGEST_BYTES = 2 * 1024 * 1024
DEEPEST = 40

_Parser = getattr(yaml, "CSafeLoader", yaml.SafeLoader)
_INTEGER = re.compile(r"[-+]?(?:0|[1-9]\d*)")
_REAL = re.compile(r"[-+]?(?:\d+\.\d*|\.\d+|\d+\.?\d*[eE][-+]?\d+|\.\d+[eE][-+]?\d+)")
_SLIPPERY_REAL = re.compile(r"[-+]?\d+[eE][-+]?\d+|[-+]?\d+\.\d*[eE]\d+")
_YES_NO = re.compile(r"(?:y|n|yes|no|on|off)", re.IGNORECASE)
_OTHER_BOOL = re.compile(r"(?:True|TRUE|False|FALSE)")
_DATE = re.compile(r"\d{4}-\d{1,2}-\d{1,2}(?:[Tt ].*)?")
_CLOCK = re.compile(r"[-+]?\d+(?::[0-5]?\d)+(?:\.\d*)?")
_OCTAL = re.compile(r"[-+]?0[\d_]+|0o\d+|0x[0-9a-fA-F]+|0b[01]+")
_NOT_FINITE = re.compile(r"[-+]?\.(?:inf|Inf|INF)|\.(?:nan|NaN|NAN)")
_GROUPED = re.compile(r"[-+]?\d+(?:_\d+)+(?:\.\d*)?")


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
        text = self.lines[place.line - 1] if 0 < place.line <= len(self.lines) else ""
        return Problem(place, what, why, do, text)


def read_yaml(path: Path, shown: str = "") -> Document:
    """Read a file. `shown` is its name in messages. Raises Refused with every problem of the file."""
    name = shown or str(path)
    try:
        size = path.stat().st_size
    except OSError as fault:
        raise Refused(
            [Problem(Place(name), f"cannot be read: {fault.strerror}", do="check the name and the rights")]
        ) from fault
    if size > LARGEST_BYTES:
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
    return parse_yaml(path.read_bytes(), name)


def parse_yaml(data: bytes, name: str) -> Document:
    """Read the bytes of a file as one mapping. Raises Refused with every problem found."""
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as fault:
        line = data[: fault.start].count(b"\n") + 1
        raise Refused([Problem(Place(name, line), "this is not UTF-8 text", do="save the file as UTF-8")]) from fault
    reader = _Reader(name, tuple(text.split("\n")))
    return reader.document(text)


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
        self.places.setdefault(path, self._place(event))
        if isinstance(event, yaml.AliasEvent):
            self._add(
                event,
                f"'*{event.anchor}' repeats another part of the file",
                "aliases hide what a rule says and can blow a file up",
                "write the values out",
            )
            return None
        if event.anchor:
            self._add(
                event, f"'&{event.anchor}' names a part for repeating", "aliases are not used here", "take it out"
            )
        if event.tag is not None and event.tag != "!":
            self._add(event, f"the tag {event.tag!r} cannot stand here", "files hold plain data only", "take it out")
        if isinstance(event, yaml.ScalarEvent):
            return self._scalar(event)
        if depth >= DEEPEST:
            self._add(event, f"this nests more than {DEEPEST} levels deep", do="flatten it")
            raise Refused(self.problems)
        if isinstance(event, yaml.SequenceStartEvent):
            return self._sequence(events, path, depth)
        return self._mapping(events, path, depth)

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
            key = self._key(event, events, path)
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

    def _key(self, event: Any, events: Iterator[Any], path: Path_) -> str:
        if not isinstance(event, yaml.ScalarEvent):
            self._add(event, "a key must be a plain word", do="write 'key: value'")
            self._value(event, events, (*path, "?"), 0)
            return "?"
        if event.implicit[0] and not event.style:
            if event.value == "<<":
                self._add(
                    event, "'<<' merges another part of the file", "merging hides what a rule says", "write it out"
                )
            if _YES_NO.fullmatch(event.value) and len(event.value) > 1:
                self._add(
                    event,
                    f"plain {event.value} is read as true or false by most YAML readers",
                    do=f'write "{event.value}" in quotes',
                )
        return str(event.value)

    def _scalar(self, event: Any) -> Any:
        word: str = event.value
        if event.style or not event.implicit[0]:
            return word
        if word in ("true", "false"):
            return word == "true"
        if _INTEGER.fullmatch(word):
            return int(word)
        if _REAL.fullmatch(word) and not _SLIPPERY_REAL.fullmatch(word):
            return float(word)
        if trap := _trap(word):
            self._add(event, *trap)
        return word

    def _place(self, event: Any) -> Place:
        return Place(self.name, event.start_mark.line + 1, event.start_mark.column + 1)

    def _add(self, event: Any, what: str, why: str = "", do: str = "") -> None:
        self.problems.append(self._problem(self._place(event), what, why, do))

    def _problem(self, place: Place, what: str, why: str = "", do: str = "") -> Problem:
        text = self.lines[place.line - 1] if 0 < place.line <= len(self.lines) else ""
        return Problem(place, what, why, do, text)


def _trap(word: str) -> tuple[str, str, str] | None:
    """What is treacherous about a plain word, why, and what to write."""
    quoted = f'write "{word}" in quotes for the text'
    if word in ("", "~", "null", "Null", "NULL"):
        return (
            "nothing stands after this key",
            "an empty value would be read as null",
            "write the value, or take the key out",
        )
    if _YES_NO.fullmatch(word):
        return f"plain {word} is read as true or false by most YAML readers", "", f'write "{word}" in quotes'
    if _OTHER_BOOL.fullmatch(word):
        return f"{word} is spelled {word.lower()} here", "", f"write {word.lower()}, or {quoted}"
    if _SLIPPERY_REAL.fullmatch(word):
        return (
            f"{word} is a text to some YAML readers and a number to others",
            "",
            f"write {float(word)!r} for the number, or {quoted}",
        )
    if _DATE.fullmatch(word):
        return f"{word} is read as a date by most YAML readers", "", quoted
    if _CLOCK.fullmatch(word):
        return f"{word} is read as a count of seconds by some YAML readers", "", quoted
    if _OCTAL.fullmatch(word):
        return (
            f"{word} is read to base 8, 16 or 2 by some YAML readers",
            "",
            f"write it without the leading 0, or {quoted}",
        )
    if _NOT_FINITE.fullmatch(word):
        return (
            f"{word} is no number that can be measured",
            "",
            "write a range such as '> 38' where there is no upper end",
        )
    if _GROUPED.fullmatch(word):
        return f"{word} is a number to some YAML readers and a text to others", "", "write it without '_'"
    return None
