"""Who signed for a joint and how its decisions moved over time, for its page and the project's."""

from __future__ import annotations

from markupsafe import Markup

from weldbasis.authority.history import Moved, given_in, history_of
from weldbasis.authority.sign_offs import Standing
from weldbasis.site.content import Decided
from weldbasis.site.render import page


def past_html(decided: Decided, joint: str) -> Markup:
    """The sign-offs of a joint and the history of its decisions; nothing where there is neither."""
    standings = [one for one in decided.standings if one.sign_off.joint == joint]
    moved: tuple[Moved, ...] = ()
    if decided.records:
        inputs = given_in(decided.evaluation.facts, decided.evaluation.knowledge, joint)
        moved = history_of(joint, decided.records, inputs)
    if not standings and not moved:
        return Markup("")
    return Markup(page("past.html", standings=standings, moved=moved))


def signed_joints(decided: Decided) -> list[tuple[str, list[Standing]]]:
    """Every joint with its sign-offs, in the order of the project; empty where nobody signed for any."""
    if not decided.standings:
        return []
    return [
        (joint.id, [one for one in decided.standings if one.sign_off.joint == joint.id])
        for joint in decided.project.joints
    ]
