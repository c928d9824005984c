"""Each trap of YAML is refused with a message that names it, all of a file at once."""

from __future__ import annotations

from pathlib import Path

import pytest

from weldbasis.load.yaml_text import DEEPEST, LARGEST_BYTES, parse_yaml, read_yaml
from weldbasis.problem import Refused

TRAPS = [
    ("a: no", "f:1:4: plain no is read as true or false by most YAML readers"),
    ("a: Yes", "f:1:4: plain Yes is read as true or false by most YAML readers"),
    ("a: True", "f:1:4: True is spelled true here"),
    ("a: 1e3", "f:1:4: 1e3 is a text to some YAML readers and a number to others"),
    ("a: 2026-12-01", "f:1:4: 2026-12-01 is read as a date by most YAML readers"),
    ("a: 12:30:00", "f:1:4: 12:30:00 is read as a count of seconds by some YAML readers"),
    ("a: 010", "f:1:4: 010 is read to base 8, 16 or 2 by some YAML readers"),
    ("a: .inf", "f:1:4: .inf is no number that can be measured"),
    ("a: 1_000", "f:1:4: 1_000 is a number to some YAML readers and a text to others"),
    ("a:", "f:1:3: nothing stands after this key"),
    ("a: null", "f:1:4: nothing stands after this key"),
    ("a: 1\nb: 2\na: 3", "f:3:1: 'a' stands here twice; first in line 1"),
    ("a: !!python/object:x.y z", "f:1:4: the tag 'tag:yaml.org,2002:python/object:x.y' cannot stand here"),
    ("a: !own z", "f:1:4: the tag '!own' cannot stand here"),
    ("a: &x 1", "f:1:4: '&x' names a part for repeating"),
    ("a: &x 1\nb: *x", "f:2:4: '*x' repeats another part of the file"),
    ("a: {<<: {b: 1}}", "f:1:5: '<<' merges another part of the file"),
    ("- 1", "f:1:1: the file does not start with 'key: value' lines"),
    ("", "f:1:1: the file is empty"),
    ("a: 1\n---\nb: 2", "f:2:1: a second document starts here"),
    ("no: 1", "f:1:1: plain no is read as true or false by most YAML readers"),
    ("a: no\r\nb: 1\r\n", "f:1:4: plain no is read as true or false by most YAML readers"),
    ("a: 1\u2028b: no", "f:2:4: plain no is read as true or false by most YAML readers"),
    ("a: ! x", "f:1:4: the tag '!' cannot stand here"),
    ("!!str a: 1", "f:1:1: the tag 'tag:yaml.org,2002:str' cannot stand here"),
    ("a: x\x07y", "f:1:5: the character U+0007 cannot stand in a file of text"),
    ('"\\e": 1', "f:1:1: the character U+001B cannot stand in a text"),
    ("a: " + "9" * 5000, "f:1:4: this number is too large to be kept exactly"),
    ("---\n", "f:1:1: the file is empty"),
    ("~: 1", "f:1:1: a key is empty here"),
    ("true: 1", "f:1:1: plain true is read as true or false by most YAML readers"),
]


@pytest.mark.parametrize(("text", "message"), TRAPS)
def test_trap_is_refused_by_name(text: str, message: str) -> None:
    with pytest.raises(Refused) as caught:
        parse_yaml(text.encode(), "f")
    assert message in {str(problem).split("\n")[0] for problem in caught.value.problems}


def test_all_problems_of_a_file_come_at_once_with_their_lines() -> None:
    with pytest.raises(Refused) as caught:
        parse_yaml(b"a: no\nb: 1e3\nc: 2026-01-01\n", "f")
    assert [problem.place.line for problem in caught.value.problems] == [1, 2, 3]
    assert str(caught.value.problems[0]) == (
        'f:1:4: plain no is read as true or false by most YAML readers\n    a: no\n       ^\n    write "no" in quotes'
    )


def test_plain_values_and_their_places() -> None:
    document = parse_yaml(b'a: 1\nb: [2.5, "no", {c: true}]\n', "f")
    assert document.data == {"a": 1, "b": [2.5, "no", {"c": True}]}
    assert str(document.place("b", 2, "c")) == "f:2:17"
    assert str(document.place("b", 2, "missing")) == "f:2:16"


def test_alias_bomb_costs_nothing() -> None:
    bomb = "a: &a [x]\n" + "".join(
        f"{chr(98 + i)}: &{chr(98 + i)} [*{chr(97 + i)}, *{chr(97 + i)}]\n" for i in range(20)
    )
    with pytest.raises(Refused):
        parse_yaml(bomb.encode(), "f")


def test_too_deep_and_too_large(tmp_path: Path) -> None:
    deep = "a: " + "[" * (DEEPEST + 5) + "]" * (DEEPEST + 5)
    with pytest.raises(Refused, match=f"nests more than {DEEPEST} levels"):
        parse_yaml(deep.encode(), "f")
    large = tmp_path / "large.yaml"
    large.write_bytes(b"a: x\n#" + b"x" * LARGEST_BYTES)
    with pytest.raises(Refused, match="at most"):
        read_yaml(large)


@pytest.mark.parametrize("text", ["? " * 3000 + "a", "a: " + "{? " * 3000, "- " * 3000, "[" * 100_000])
def test_depth_is_bounded_however_it_is_written(text: str) -> None:
    with pytest.raises(Refused):
        parse_yaml(text.encode(), "f")


def test_lines_are_shown_without_their_ends_and_only_where_they_help() -> None:
    with pytest.raises(Refused) as caught:
        parse_yaml(b"a: no\r\nb: [" + b"x, " * 100 + b"no]\r\n", "f")
    assert [problem.line_text for problem in caught.value.problems] == ["a: no", ""]


def test_nitrogen_is_a_key() -> None:
    assert parse_yaml(b"{N: 0.01, Y: 1}", "f").data == {"N": 0.01, "Y": 1}


def test_no_yaml_and_no_utf8() -> None:
    with pytest.raises(Refused, match="this is no YAML"):
        parse_yaml(b"a: [1, 2", "f")
    with pytest.raises(Refused, match="not UTF-8"):
        parse_yaml(b"a: \xff", "f")
    with pytest.raises(Refused, match="a tab cannot stand here"):
        parse_yaml(b"a:\n\tb: 1\n", "f")
