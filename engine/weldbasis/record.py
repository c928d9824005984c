"""The record of a project's decisions: canonical JSON with digests, written aside and replaced, and its replay."""

from __future__ import annotations

import contextlib
import hashlib
import json
import os
import tempfile
from collections.abc import Iterable, Iterator, Mapping
from pathlib import Path
from typing import Any

import rfc8785

from weldbasis import __version__
from weldbasis.evaluate import Evaluation
from weldbasis.knowledge import Quantity
from weldbasis.problem import Place, Problem, Refused
from weldbasis.project import Project
from weldbasis.reasons import trace_joint
from weldbasis.settling.settle import settle
from weldbasis.steps import values_of
from weldbasis.trace import JointTrace, Value

FORMAT = "weldbasis-record/1"


def canonical_bytes(data: Any) -> bytes:
    """The one spelling of JSON data after RFC 8785, with a final line end."""
    return rfc8785.dumps(data) + b"\n"


def digest_of(data: Any) -> str:
    """The sha256 digest of data in its canonical spelling, as "sha256:…"."""
    return "sha256:" + hashlib.sha256(rfc8785.dumps(data)).hexdigest()


def record_of(project: Project, evaluation: Evaluation) -> dict[str, Any]:
    """The whole record of a project; the same bytes, made canonical, for the same inputs and rules."""
    narrowings = settle(evaluation, range(len(evaluation.facts.joints)))
    traces = (trace_joint(evaluation, row, narrowings) for row in range(len(evaluation.facts.joints)))
    return record_from_traces(project, evaluation, traces)


def record_from_traces(project: Project, evaluation: Evaluation, traces: Iterable[JointTrace]) -> dict[str, Any]:
    """The record from traces that are at hand already, in the order of the joints."""
    joints = [joint_record(evaluation, row, trace) for row, trace in enumerate(traces)]
    return record_of_joints(project, evaluation, joints)


def record_of_joints(project: Project, evaluation: Evaluation, joints: list[dict[str, Any]]) -> dict[str, Any]:
    """The record from its joints."""
    return {
        "format": FORMAT,
        "engine": __version__,
        "project": project.id,
        "rules": {"release": project.rules, "digest": evaluation.knowledge.digest},
        "inputs": digest_of(project.meaning),
        "joints": joints,
    }


def joint_record(evaluation: Evaluation, row: int, trace: JointTrace) -> dict[str, Any]:
    """One joint's part of the record, closed by its own digest."""
    quantities = evaluation.knowledge.quantities
    decisions: dict[str, Any] = {}
    for decision in trace.decisions:
        quantity = quantities[decision.ref.quantity]
        if quantity.part_of and decision.state == "uncovered":
            continue
        shown = set_record(decision.value, quantity)
        decisions[quantity.id] = {**shown, "state": decision.state, "governing": list(decision.governing)}
    decided = {decision.ref for decision in trace.decisions}
    members: list[dict[str, Any]] = [
        {"member": number, "steel": name, "quantities": {}} for number, name in enumerate(trace.members, start=1)
    ]
    joint: dict[str, Any] = {}
    for ref, value in values_of(evaluation, row):
        if value.presence != "absent" and ref not in decided:
            into = joint if not ref.member else members[ref.member - 1]["quantities"]
            into[ref.quantity] = set_record(value, quantities[ref.quantity])
    found = {
        "joint": trace.joint,
        "decisions": decisions,
        "quantities": joint,
        "members": members,
        "findings": [{"level": f.level, "rule": f.rule, "text": f.text} for f in trace.findings],
    }
    return {**found, "digest": digest_of(found)}


def set_record(value: Value, quantity: Quantity) -> dict[str, Any]:
    """A set as the record keeps it: numbers rounded to the vocabulary's decimals, so that the last bits of a
    machine's arithmetic never show.
    """
    found: dict[str, Any] = {}
    if value.low is not None and value.high is not None:
        found = {"low": _rounded(value.low, quantity), "high": _rounded(value.high, quantity), "unit": quantity.unit}
    elif value.presence != "absent":
        found = {"any_of": list(value.any_of)}
    if value.presence != "present":
        found["presence"] = value.presence
    return found


def _rounded(number: float, quantity: Quantity) -> float:
    rounded = round(number, quantity.decimals + 2)
    return rounded + 0.0  # no minus zero


def write_aside(path: Path, data: bytes) -> None:
    """Write a file whole or not at all: beside its place first, then moved there."""
    path.parent.mkdir(parents=True, exist_ok=True)
    handle, name = tempfile.mkstemp(dir=path.parent, prefix=f".{path.name}.", suffix=".part")
    try:
        with os.fdopen(handle, "wb") as out:
            out.write(data)
            out.flush()
            os.fsync(out.fileno())
        os.chmod(name, 0o644)
        os.replace(name, path)
    except BaseException:
        with contextlib.suppress(FileNotFoundError):
            os.unlink(name)
        raise


def replay(kept: bytes, fresh: Mapping[str, Any]) -> list[str]:
    """What differs between a kept record and the same project decided afresh; empty when the bytes agree.

    Every difference names the joint and the figure, so that an auditor sees at once what was changed.
    """
    if kept == canonical_bytes(fresh):
        return []
    old = json.loads(kept)
    found = [
        f"{key}: the record says {old.get(key)!r}, now {fresh[key]!r}"
        for key in ("format", "engine", "project", "inputs", "rules")
        if old.get(key) != fresh[key]
    ]
    before = {joint.get("joint"): joint for joint in old.get("joints", [])}
    after = {joint["joint"]: joint for joint in fresh["joints"]}
    found += [f"joint {name}: in the record, not in the project" for name in before if name not in after]
    found += [f"joint {name}: in the project, not in the record" for name in after if name not in before]
    for name, joint in after.items():
        if name in before and before[name] != joint:
            found += [f"joint {name}: {line}" for line in differences(before[name], joint)]
    return found or ["the record holds the same data in another spelling; its bytes are not canonical"]


def differences(old: Any, new: Any, path: str = "") -> Iterator[str]:
    """Where two pieces of JSON data differ, each with its path and both values."""
    if isinstance(old, dict) and isinstance(new, dict):
        for key in sorted({*old, *new}):
            inner = f"{path}.{key}" if path else key
            if key not in old or key not in new:
                yield f"{inner} is only {'now there' if key not in old else 'in the record'}"
            else:
                yield from differences(old[key], new[key], inner)
    elif isinstance(old, list) and isinstance(new, list) and len(old) == len(new):
        for place, (one, other) in enumerate(zip(old, new, strict=True)):
            yield from differences(one, other, f"{path}[{place}]")
    elif old != new:
        before, after = (json.dumps(data, ensure_ascii=False) for data in (old, new))
        yield f"{path}: the record says {before}, now {after}"


def read_record(path: Path, data: bytes) -> Mapping[str, Any]:
    """A record's data. Raises Refused where the file is no record of this format."""
    place = Place(str(path))
    try:
        found = json.loads(data)
    except ValueError as fault:
        line, column = getattr(fault, "lineno", 1), getattr(fault, "colno", 1)
        raise Refused(
            [
                Problem(
                    Place(str(path), line, column),
                    "this is no JSON",
                    "a record is one line of canonical JSON, written by decide",
                )
            ]
        ) from fault
    if not isinstance(found, dict) or found.get("format") != FORMAT:
        said = found.get("format") if isinstance(found, dict) else None
        raise Refused(
            [
                Problem(
                    place,
                    f"this is no record of format {FORMAT!r}; it says {said!r}",
                    do="name a record.json that weldbasis decide wrote",
                )
            ]
        )
    if not isinstance(found.get("joints"), list):
        raise Refused([Problem(place, "the record has no list of joints", do="restore the record as it was written")])
    return found
