"""A joint's page: decisions, why, methods, inputs, findings, the whole trace."""

from __future__ import annotations

from dataclasses import dataclass
from html import escape

from markupsafe import Markup

from weldbasis.knowledge import Knowledge, Quantity
from weldbasis.project import JointEntry, Project
from weldbasis.sentences import value_text
from weldbasis.site.pictures import Cycle, method_strip, thermal_cycle
from weldbasis.site.render import page, value_html
from weldbasis.trace import Candidate, Decision, JointTrace, Ref, Step


@dataclass(frozen=True)
class Sentence:
    """One sentence of a chain: how deep it stands, its words, whose it is, its rule and its arithmetic."""

    depth: int
    words: str
    who: str
    rule: str
    figures: str
    given: bool


@dataclass(frozen=True)
class Line:
    """An input as the page shows it: its step, its quantity and whose it is."""

    step: Step
    quantity: Quantity
    member: str


def joint_body(
    project: Project,
    entry: JointEntry,
    knowledge: Knowledge,
    trace: JointTrace,
    digest: str,
    levers: str = "",
    past: str = "",
) -> str:
    """The HTML of a joint's page; `levers` and `past` are its finished sections of levers and of what was."""
    shown = [
        d for d in trace.decisions if not (knowledge.quantities[d.ref.quantity].part_of and d.state == "uncovered")
    ]
    main = [d for d in shown if not knowledge.quantities[d.ref.quantity].part_of]
    return page(
        "joint.html",
        project=project,
        entry=entry,
        trace=trace,
        quantities=knowledge.quantities,
        rules=knowledge.rules,
        shown=shown,
        main=main,
        digest=digest,
        past=past,
        levers=Markup(levers),
        picture=thermal_cycle(cycle_of(trace)),
        chains={d.ref.quantity: chain_lines(knowledge, trace, d) for d in main},
        methods=methods_of(knowledge, trace),
        strip=_strip(knowledge, trace),
        given=given_lines(knowledge, trace),
        steps=len(trace.gave),
        rows=Markup("".join(_trace_row(knowledge, trace, ref) for ref in trace.gave)),
        why_none=lambda step: withheld_reasons(trace, step),
    )


def _line(knowledge: Knowledge, trace: JointTrace, step: Step) -> Line:
    member = trace.members[step.ref.member - 1] if step.ref.member else ""
    number = f"{step.ref.member}: " if step.ref.member else ""
    return Line(step, knowledge.quantities[step.ref.quantity], f"{number}{member}" if member else "")


def chain_lines(knowledge: Knowledge, trace: JointTrace, decision: Decision) -> list[Sentence]:
    """The chain of a decision with depths. What another part says in the very same words is left to the full trace,
    and inputs of one paper that stand together make one sentence.
    """
    depths: dict[Ref, int] = {decision.ref: 0}
    lines: list[Sentence] = []
    said: set[tuple[str, str]] = set()
    inputs: list[Step] = []
    for ref in decision.chain:
        step = trace.steps[ref]
        depth = depths.setdefault(ref, 0)
        for below in [c.ref for c in step.candidates if c.governs] or step.reads:
            depths.setdefault(below, depth + 1)
        if step.state == "input-missing" or (step.ref.quantity, step.sentence) in said or ref.quantity in _PLAIN:
            continue
        said.add((step.ref.quantity, step.sentence))
        if step.state == "given":
            if inputs and (inputs[0].origin != step.origin or inputs[0].ref.member != ref.member):
                lines.append(_inputs_sentence(knowledge, trace, inputs, depths))
                inputs = []
            inputs.append(step)
            continue
        if inputs:
            lines.append(_inputs_sentence(knowledge, trace, inputs, depths))
            inputs = []
        lines.append(Sentence(depth, step.sentence, _who(trace, ref), step.rule, _arithmetic(knowledge, step), False))
    return [*lines, _inputs_sentence(knowledge, trace, inputs, depths)] if inputs else lines


# Facts that only say which part is meant; the part is named beside every sentence anyway.
_PLAIN = frozenset({"member_role", "member_number"})


def _who(trace: JointTrace, ref: Ref) -> str:
    return f"{ref.member}: {trace.members[ref.member - 1]}" if ref.member else ""


def _arithmetic(knowledge: Knowledge, step: Step) -> str:
    if step.state != "gave" or not step.figures or " → " in step.figures or step.value.low is None:
        return step.figures
    value = value_text(knowledge.quantities[step.ref.quantity], step.value)
    return f"{step.figures} = {value}{' (worked out in parts)' if step.value.narrowed else ''}"


def _inputs_sentence(knowledge: Knowledge, trace: JointTrace, inputs: list[Step], depths: dict[Ref, int]) -> Sentence:
    parts: list[str] = []
    for step in inputs:
        quantity = knowledge.quantities[step.ref.quantity]
        parts.append(f"{quantity.title if not parts else quantity.title.lower()} {value_text(quantity, step.value)}")
    origin = inputs[0].origin
    words = ", ".join(parts) + (f" ({origin.text})." if origin else ".")
    return Sentence(depths[inputs[0].ref], words, _who(trace, inputs[0].ref), "", "", True)


def given_lines(knowledge: Knowledge, trace: JointTrace) -> list[Line]:
    """What was given, joint first, then part by part."""
    refs = [ref for ref in trace.given if not ref.quantity.startswith("contract_") and ref.quantity not in _PLAIN]
    return [_line(knowledge, trace, trace.steps[ref]) for ref in sorted(refs, key=lambda ref: ref.member)]


def _trace_row(knowledge: Knowledge, trace: JointTrace, ref: Ref) -> str:
    """A row of the whole trace, put together here because there are hundreds on every page."""
    step, quantity = trace.steps[ref], knowledge.quantities[ref.quantity]
    who = f'<br><span class="wb-who">{escape(_who(trace, ref))}</span>' if ref.member else ""
    figures = f'<span class="wb-figures">{escape(step.figures)}</span>' if step.figures else ""
    rule = f'<a class="wb-rule" href="../../../rules/{step.rule}.html">{step.rule}</a>'
    return (
        f"<tr><td>{escape(quantity.title)}{who}</td><td>{value_html(quantity, step.value)}</td>"
        f"<td>{escape(step.sentence)} {rule}{figures}</td></tr>\n"
    )


def methods_of(knowledge: Knowledge, trace: JointTrace) -> list[tuple[Quantity, Candidate, Step]]:
    """Every preheat method with its value, or with why it gave none."""
    step = trace.steps.get(Ref("preheat_basis"))
    if step is None:
        return []
    governing = {c.ref for c in step.candidates if c.governs}
    for chosen in [c.ref for c in step.candidates if c.governs]:
        governing |= {c.ref for c in trace.steps[chosen].candidates if c.governs}
    found = []
    for candidate in step.candidates:
        if candidate.ref.quantity in ("preheat_contract", "preheat_general"):
            continue
        marked = Candidate(
            candidate.ref,
            candidate.value,
            candidate.ref in governing,
            candidate.taken,
            candidate.behind,
            candidate.remark,
        )
        found.append((knowledge.quantities[candidate.ref.quantity], marked, trace.steps[candidate.ref]))
    return found


def withheld_reasons(trace: JointTrace, step: Step) -> tuple[str, ...]:
    """Why a method gave nothing: its own reasons, or those of the part it was gathered from."""
    if step.state in ("not-applicable", "withheld") and step.reasons:
        return step.reasons
    for candidate in step.candidates:
        below = trace.steps.get(candidate.ref)
        if below and below.value.presence == "absent" and below.reasons:
            return tuple(below.reasons)
    return step.reasons


def _strip(knowledge: Knowledge, trace: JointTrace) -> str:
    return method_strip([(q.title, c) for q, c, _ in methods_of(knowledge, trace)])


def cycle_of(trace: JointTrace) -> Cycle:
    """The figures of the thermal cycle."""

    def span(name: str) -> tuple[float, float] | None:
        step = trace.steps.get(Ref(name))
        return (
            (step.value.low, step.value.high)
            if step and step.value.low is not None and step.value.high is not None
            else None
        )

    def number(name: str, high: bool = False) -> float | None:
        found = span(name)
        return None if found is None else found[1] if high else found[0]

    return Cycle(
        span("ambient"),
        span("min_preheat"),
        span("max_interpass"),
        span("hydrogen_release_temp"),
        number("hydrogen_release_time", True),
        number("pwht_temp_min", True),
        number("pwht_temp_max"),
        number("pwht_hold", True),
    )
