"""Sign-offs of a project: who signed for which joint, whether that still stands, and what changed where it does not."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal

from weldbasis.authority.history import decisions_moved, given_in, inputs_moved
from weldbasis.evaluate import Evaluation
from weldbasis.graph import KnowledgeGraph, quantity_node
from weldbasis.load.schema import schema_problems
from weldbasis.load.signature import sign, signature_fault
from weldbasis.load.yaml_text import read_yaml
from weldbasis.problem import Place, Problem, Refused, nearest
from weldbasis.record import canonical_bytes, digest_of, write_aside

SIGN_OFFS, SIGNED = "sign-offs.yaml", "signed"
State = Literal["signed", "lapsed", "false"]
_HEAD = """# Who has signed for which joint. Written by decide --sign; what was signed lies in signed/. Never edited.
sign_offs:
"""


@dataclass(frozen=True)
class SignOff:
    """One entry as written; `decision` is empty where the whole joint was signed."""

    joint: str
    decision: str
    digest: str
    role: str
    name: str
    date: str
    remark: str
    signature: Mapping[str, str] | None
    place: Place


@dataclass(frozen=True)
class Standing:
    """A sign-off and how it stands: signed, lapsed with what changed, or false where its signature does not hold."""

    sign_off: SignOff
    state: State
    changes: tuple[str, ...] = ()
    fault: str = ""


def read_sign_offs(folder: Path, joints: Sequence[str], shown: str) -> tuple[SignOff, ...]:
    """The sign-offs of a project in a folder; none where it has no file of them. Raises Refused."""
    path = folder / SIGN_OFFS
    if not path.exists():
        return ()
    document = read_yaml(path, shown)
    if problems := schema_problems(document, "sign-offs"):
        raise Refused(problems)
    found = []
    unknown = []
    for number, data in enumerate(document.data["sign_offs"]):
        name = str(data["joint"])
        place = document.place("sign_offs", number, "joint")
        if name not in joints:
            what = f"a sign-off names joint {name!r}, which is not in the project"
            unknown.append(document.problem_at(place, what, do=nearest(name, joints)))
        parts = (data.get("decision", ""), data["digest"], data["role"], data["name"], data["date"])
        found.append(SignOff(name, *parts, data.get("remark", ""), data.get("signature"), place))
    if unknown:
        raise Refused(unknown)
    return tuple(found)


def signed_part(joint: Mapping[str, Any], decision: str, graph: KnowledgeGraph) -> Mapping[str, Any]:
    """What is signed: a joint's record, or one decision with every quantity of the record that it rests on."""
    if not decision:
        return {key: value for key, value in joint.items() if key != "digest"}
    above = {node.id for node in graph.rests_on(quantity_node(decision)) if node.sort == "quantity"}
    return {
        "joint": joint["joint"],
        "decisions": {decision: joint["decisions"].get(decision, {})},
        "quantities": {name: value for name, value in joint["quantities"].items() if name in above},
        "members": [
            {**member, "quantities": {n: v for n, v in member["quantities"].items() if n in above}}
            for member in joint["members"]
        ],
    }


def standing_of(
    sign_offs: Sequence[SignOff], record: Mapping[str, Any], evaluation: Evaluation, folder: Path
) -> tuple[Standing, ...]:
    """How every sign-off stands against a record that was just made of an evaluation."""
    joints = {joint["joint"]: joint for joint in record["joints"]}
    facts, knowledge = evaluation.facts, evaluation.knowledge
    return tuple(
        _standing(one, joints[one.joint], evaluation.graph, given_in(facts, knowledge, one.joint), folder)
        for one in sign_offs
    )


def _standing(
    sign_off: SignOff, joint: Mapping[str, Any], graph: KnowledgeGraph, inputs: frozenset[str], folder: Path
) -> Standing:
    if sign_off.signature is not None:
        fault = signature_fault(sign_off.signature, digest_of(_entry(sign_off)))
        if fault:
            return Standing(sign_off, "false", fault=f"the sign-off {fault}")
    now = signed_part(joint, sign_off.decision, graph)
    if digest_of(now) == sign_off.digest:
        return Standing(sign_off, "signed")
    return Standing(sign_off, "lapsed", _changes(sign_off, now, inputs, folder))


def _changes(sign_off: SignOff, now: Mapping[str, Any], inputs: frozenset[str], folder: Path) -> tuple[str, ...]:
    path = _kept(folder, sign_off.digest)
    if not path.is_file():
        return ("what was signed is not kept beside the project, so what changed cannot be told",)
    before = json.loads(path.read_bytes())
    if digest_of(before) != sign_off.digest:
        return (f"{path.name} was edited: it is not what was signed",)
    lines = [*decisions_moved(before["decisions"], now["decisions"]), *inputs_moved(before, now, inputs)]
    if before.get("findings") != now.get("findings"):
        lines.append("its findings")
    return tuple(lines) or ("figures on the way from the inputs to the decision, by other rules",)


def _entry(sign_off: SignOff) -> dict[str, str]:
    """What a signature is made of."""
    names = ("joint", "decision", "digest", "role", "name", "date", "remark")
    return {name: getattr(sign_off, name) for name in names}


def _kept(folder: Path, digest: str) -> Path:
    return folder / SIGNED / f"{digest.removeprefix('sha256:')[:24]}.json"


def add_sign_off(folder: Path, sign_off: SignOff, part: Mapping[str, Any], key: Any = None) -> None:
    """Append a sign-off to the project's file and keep what was signed; `key` is a private key to sign it with."""
    write_aside(_kept(folder, sign_off.digest), canonical_bytes(part))
    data: dict[str, Any] = {name: value for name, value in _entry(sign_off).items() if value}
    if key is not None:
        data["signature"] = sign(digest_of(_entry(sign_off)), key)
    path = folder / SIGN_OFFS
    text = path.read_text(encoding="utf-8") if path.exists() else _HEAD
    line = json.dumps(data, ensure_ascii=False)
    write_aside(path, f"{text.rstrip()}\n  - {line}\n".encode())


def unknown_joint(name: str, joints: Sequence[str], folder: Path) -> Refused:
    """The error for a joint to be signed that is not there."""
    place = Place(str(folder / "project.yaml"))
    return Refused([Problem(place, f"there is no joint {name!r} to sign for", do=nearest(name, joints))])
