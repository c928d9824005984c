"""A small house layer on the small set of rules, for the tests of layers, releases and what a change moves."""

from __future__ import annotations

import shutil
from pathlib import Path

SMALL = Path(__file__).parent / "fixtures" / "kb_small"

HEAD = """title: Rules of the yard
custodian: welding authority
release: working
layers: [published, yard]
stands_on: ../kb
"""
AMENDMENTS = """amendments:
  - {rule: min-preheat, how: tighten, why: Two cracks under thick lugs., approved_by: welding authority}
  - {rule: yard-lamps, how: add, why: Lamps of the hall are weak., approved_by: welding authority}
  - {rule: outdoors-cold, how: withdraw, why: The yard welds in a hall., approved_by: welding authority}
  - {quantity: restraint, how: relax, why: Frames here are free., approved_by: welding authority,
     justified_by: survey of 40 frames}
"""
PREHEAT = """id: min-preheat
version: 3
title: Preheat by thickness, yard
kind: table
for_each: joint
gives: min_preheat
reads: {d: thickness, restraint: restraint}
valid_within: {thickness: "[1, 100]"}
read_as: the-one-row
rows:
  - {when: {d: "[1, 30]"}, give: 20}
  - {when: {d: "(30, 100]", restraint: [low, medium]}, give: 90}
  - {when: {d: "(30, 100]", restraint: high}, give: 120}
say: "{d} mm under {restraint} restraint asks for {result} °C here."
cites:
  - {source: small-handbook, at: "table 2", checked: seen}
changes:
  - {version: 1, date: "2026-11-01", what: First issue, why: A set for tests, approved_by: welding authority}
  - {version: 2, date: "2026-12-01", what: Row for high restraint, why: A set for tests, approved_by: welding authority}
  - {version: 3, date: "2027-01-10", what: 90 °C, why: Two cracks under thick lugs., approved_by: welding authority}
"""
LAMPS = """id: yard-lamps
version: 1
title: Lamps
kind: limit
for_each: joint
reads: [thickness]
applies_when: {thickness: "> 80"}
level: note
say: "Parts of {thickness} mm shade the lamps."
cites:
  - {source: small-handbook, at: "page 9", checked: common-practice}
changes:
  - {version: 1, date: "2027-01-10", what: First issue, why: Weak lamps., approved_by: welding authority}
"""
RESTRAINT = """quantities:
  - id: restraint
    title: Restraint
    of: joint
    levels: {order: [low, medium, high], worse: last, titles: {high: stiff on all sides}}
    given: may
    if_not_given: low
    because: Frames of the yard are free.
    says: How far the parts can follow the shrinking weld.
"""


def make_house(folder: Path) -> Path:
    """The small set in `kb` and a house on it in `house`, both below the folder."""
    shutil.copytree(SMALL, folder / "kb")
    house = folder / "house"
    for name, text in (
        ("kb.yaml", HEAD),
        ("amendments.yaml", AMENDMENTS),
        ("rules/preheat/min-preheat.yaml", PREHEAT),
        ("rules/yard/yard-lamps.yaml", LAMPS),
        ("quantities/joint.yaml", RESTRAINT),
    ):
        (house / name).parent.mkdir(parents=True, exist_ok=True)
        (house / name).write_text(text, encoding="utf-8")
    return house


def change(path: Path, old: str, new: str) -> None:
    """One place of a file spoiled."""
    text = path.read_text(encoding="utf-8")
    assert old in text, f"{old!r} is not in {path}"
    path.write_text(text.replace(old, new, 1), encoding="utf-8")
