"""Templates with escaping on by default, and the small words that every page uses."""

from __future__ import annotations

from functools import cache
from typing import Any

from jinja2 import Environment, FileSystemLoader, StrictUndefined
from markupsafe import Markup, escape

from weldbasis.knowledge import Quantity
from weldbasis.places import site_folder
from weldbasis.sentences import value_text
from weldbasis.trace import Value

CHECKED_WORDS = {
    "seen": "seen in the source",
    "quoted": "seen quoted",
    "from-memory": "from memory",
    "derived": "derived",
    "common-practice": "common practice",
}
CAUTION = (
    "Decisions support qualified judgement. The contract's code, the qualified procedure and the responsible welding "
    "coordinator (ISO 14731) take precedence. Verify on the job."
)


@cache
def _environment() -> Environment:
    environment = Environment(
        loader=FileSystemLoader(site_folder() / "templates"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.globals.update(value=value_html, checked=checked_html, caution=CAUTION)
    return environment


def page(template: str, **data: Any) -> str:
    """The HTML of a page's body."""
    return _environment().get_template(template).render(**data)


def value_html(quantity: Quantity, value: Value) -> Markup:
    """A value with marks for what it rests on; the marks have words for those who hover or listen."""
    text = escape(value_text(quantity, value))
    marks = []
    if value.presence == "maybe":
        marks.append(_mark("or none", "there may be no value"))
    if value.unknown:
        marks.append(_mark("unknown", "rests on something that is not known"))
    if value.assumed:
        marks.append(_mark("assumed", "rests on an assumption"))
    if value.wide:
        marks.append(_mark("safe, may be wide", "the range is safe but was not proved to be exact"))
    if value.narrowed:
        marks.append(_mark("narrowed", "less than whole ranges would give: the joint was worked out in parts"))
    return Markup(f'<span class="wb-value">{text}</span>' + "".join(marks))


def _mark(word: str, meaning: str) -> str:
    return f' <abbr class="wb-mark" title="{escape(meaning)}">{escape(word)}</abbr>'


def checked_html(checked: str) -> Markup:
    """How a figure was checked, as a mark."""
    return Markup(
        f'<span class="wb-checked wb-checked-{escape(checked)}">{escape(CHECKED_WORDS.get(checked, checked))}</span>'
    )
