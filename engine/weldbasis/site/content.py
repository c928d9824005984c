"""What is published: each project decided once, with its traces, record and the names of its joint pages."""

from __future__ import annotations

import csv
import dataclasses
import io
import re
from collections import Counter
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from weldbasis.authority.changes import differences_between
from weldbasis.authority.history import Kept, kept_records
from weldbasis.authority.impact import ProjectImpact, impact
from weldbasis.authority.releases import releases_of
from weldbasis.authority.sign_offs import SIGN_OFFS, Standing, read_sign_offs, standing_of
from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.graph import KnowledgeGraph, build_graph
from weldbasis.knowledge import Knowledge
from weldbasis.load.knowledge import load_knowledge
from weldbasis.narrow import narrowed
from weldbasis.project import Project, read_project
from weldbasis.project.pinned import project_document, rules_folder
from weldbasis.reasons import trace_joint
from weldbasis.record import joint_record, record_of_joints
from weldbasis.settling.edges import Edge, edges
from weldbasis.settling.levers import JointLevers, levers
from weldbasis.settling.sampling import Plan, plan_samples
from weldbasis.settling.settle import Narrowing, settle
from weldbasis.site.workers import each_row
from weldbasis.trace import JointTrace
from weldbasis.views import decision_text

Progress = Callable[[int, int], object]


@dataclass(frozen=True)
class Decided:
    """A project with everything its pages show; `traces` hold no steps, which are read again page by page."""

    project: Project
    evaluation: Evaluation
    narrowings: Mapping[tuple[int, str], tuple[Narrowing, ...]]
    traces: tuple[JointTrace, ...]
    record: Mapping[str, Any]
    files: Mapping[str, str]
    counts: Mapping[str, int]
    stopped: tuple[str, ...]
    levers: Mapping[int, JointLevers]
    edges: Mapping[int, tuple[Edge, ...]]
    plan: Plan
    standings: tuple[Standing, ...] = ()
    records: tuple[Kept, ...] = ()
    impacts: tuple[tuple[str, str, ProjectImpact], ...] = ()


@dataclass(frozen=True)
class Beside:
    """A site of projects that are decided with other rules, in a folder of its own below the first."""

    folder: str
    release: str
    titles: tuple[str, ...]


@dataclass(frozen=True)
class Content:
    """All that a site is made from. `beside` names sites below it, `back` the address of the one above."""

    knowledge: Knowledge
    graph: KnowledgeGraph
    projects: tuple[Decided, ...]
    beside: tuple[Beside, ...] = ()
    back: str = ""


def decide_projects(folders: Sequence[Path], knowledge: Knowledge, progress: Progress) -> Content:
    """Read and decide every project. Raises Refused with what is wrong in any of them."""
    graph = build_graph(knowledge)
    projects = [read_project(folder, knowledge) for folder in folders]
    return Content(knowledge, graph, tuple(decide_project(project, knowledge, graph, progress) for project in projects))


def decide_project(project: Project, knowledge: Knowledge, graph: KnowledgeGraph, progress: Progress) -> Decided:
    """Decide one project: decisions, findings and record of every joint."""
    evaluation = narrowed(evaluate(knowledge, project.facts, graph))
    count = len(project.joints)
    narrowings = settle(evaluation, range(count))

    def decide(row: int) -> tuple[JointTrace, dict[str, Any]]:
        trace = trace_joint(evaluation, row, narrowings)
        return dataclasses.replace(trace, steps={}), joint_record(evaluation, row, trace)

    found = each_row(decide, count, lambda done: progress(done, 2 * count))
    traces = tuple(trace for trace, _ in found)
    record = record_of_joints(project, evaluation, [joint for _, joint in found])
    states = Counter(
        d.state for trace in traces for d in trace.decisions if not knowledge.quantities[d.ref.quantity].part_of
    )
    counts = {state: states[state] for state in ("settled", "open", "uncovered")}
    stopped = tuple(trace.joint for trace in traces if any(f.level == "stop" for f in trace.findings))
    files = file_names([trace.joint for trace in traces])
    rows = range(count)
    choices, near, plan = levers(evaluation, rows), edges(evaluation, rows), plan_samples(evaluation, rows)
    shown = str(project.folder / SIGN_OFFS)
    signed = standing_of(
        read_sign_offs(project.folder, project.facts.joints, shown), record, evaluation, project.folder
    )
    return Decided(
        project,
        evaluation,
        narrowings,
        traces,
        record,
        files,
        counts,
        stopped,
        choices,
        near,
        plan,
        signed,
        kept_records(project.folder),
        tuple(_impacts(project, knowledge)),
    )


def _impacts(project: Project, knowledge: Knowledge) -> Iterator[tuple[str, str, ProjectImpact]]:
    """What the release that a project pins changed, and what the working rules would change next."""
    folder = rules_folder(project.folder, project_document(project.folder), None)
    releases = {release.name: release for release in releases_of(folder)}
    if not releases or (knowledge.release != "working" and knowledge.release not in releases):
        return
    names = list(releases)
    pairs = []
    if knowledge.release == "working":
        pairs.append((names[-1], "working"))
    else:
        at = names.index(knowledge.release)
        pairs += [(names[at - 1], names[at])] if at else []
        pairs += [(names[at], "working")]
    for before, after in pairs:
        sets = [
            knowledge if name == knowledge.release else load_knowledge(folder, with_cases=False, release=name)
            for name in (before, after)
        ]
        if any(difference.results for difference in differences_between(sets[0], sets[1])):
            yield before, after, impact(sets[0], sets[1], [project.folder])[0]


def file_names(joints: Sequence[str]) -> dict[str, str]:
    """A file name for every joint's page, safe on every file system and unique without regard to case."""
    found: dict[str, str] = {}
    taken: set[str] = set()
    for joint in joints:
        base = re.sub(r"[^A-Za-z0-9_.-]+", "-", joint).strip("-.") or "joint"
        name, number = base, 2
        while name.lower() in taken:
            name, number = f"{base}-{number}", number + 1
        taken.add(name.lower())
        found[joint] = f"{name}.html"
    return found


def joints_csv(knowledge: Knowledge, decided: Decided) -> str:
    """The decisions of a project as CSV, a joint a row."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    decisions = list(knowledge.decisions)
    writer.writerow(["joint", *[f"{q.id} [{q.unit}]" if q.unit else q.id for q in decisions], "findings"])
    for trace in decided.traces:
        by_name = {d.ref.quantity: d for d in trace.decisions}
        findings = " | ".join(f"{f.level}: {f.text}" for f in trace.findings)
        writer.writerow([trace.joint, *[decision_text(q, by_name[q.id]) for q in decisions], findings])
    return out.getvalue()
