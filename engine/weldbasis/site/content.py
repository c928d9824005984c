"""What is published: each project decided once, with its traces, record and the names of its joint pages."""

from __future__ import annotations

import csv
import dataclasses
import io
import re
from collections import Counter
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from weldbasis.evaluate import Evaluation, evaluate
from weldbasis.graph import KnowledgeGraph, build_graph
from weldbasis.knowledge import Knowledge
from weldbasis.narrow import narrowed
from weldbasis.project import Project, read_project
from weldbasis.reasons import trace_joint
from weldbasis.record import joint_record, record_of_joints
from weldbasis.settle import Narrowing, settle
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


@dataclass(frozen=True)
class Content:
    """All that a site is made from."""

    knowledge: Knowledge
    graph: KnowledgeGraph
    projects: tuple[Decided, ...]


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
    return Decided(project, evaluation, narrowings, traces, record, files, counts, stopped)


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
