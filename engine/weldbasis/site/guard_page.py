"""The page that says how far the set of rules can be trusted: are its figures guarded, do directions hold."""

from __future__ import annotations

import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from weldbasis.knowledge import Knowledge
from weldbasis.load.yaml_text import read_yaml
from weldbasis.places import site_folder
from weldbasis.site.render import page
from weldbasis.survey.guard import reason_for


def guard_body(knowledge: Knowledge) -> str:
    """The page. What was measured for other rules is shown as such."""
    folder = site_folder() / "measured"
    reasons: Mapping[str, Any] = read_yaml(folder / "reasons.yaml").data
    figures, directions = _measured(folder / "figures.json"), _measured(folder / "directions.json")
    unguarded = [
        {**one, "why": reason_for(reasons, one["rule"], one["where"]), "known": one["rule"] in knowledge.rules}
        for one in figures["unguarded"]
    ]
    why = {one["input"]: one["why"] for one in reasons["directions"]}
    return page(
        "guard.html",
        figures=figures,
        topics=list(figures["topics"].items()),
        unguarded=unguarded,
        directions=[
            {**one, "why": why.get(one["input"], "") if one["fell"] else ""} for one in directions["directions"]
        ],
        pairs=directions["pairs"],
        stale={
            name
            for name, data in (("figures", figures), ("directions", directions))
            if data["rules"] != knowledge.digest
        },
    )


def _measured(path: Path) -> dict[str, Any]:
    data: dict[str, Any] = json.loads(path.read_bytes())
    return data
