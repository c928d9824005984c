"""Short texts of a trace for tables: a decision with its state, a count of findings. Shared by terminal and site."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence

from weldbasis.knowledge import Quantity
from weldbasis.sentences import value_text
from weldbasis.trace import Decision, Finding


def decision_text(quantity: Quantity, decision: Decision) -> str:
    """A decision for a table cell: its value, marked where it is open or not covered."""
    if decision.state == "uncovered":
        return "uncovered"
    text = value_text(quantity, decision.value)
    return f"{text} (open)" if decision.state == "open" else text


def finding_count_text(findings: Sequence[Finding]) -> str:
    """ "1 stop, 2 hold" and so on; empty where there is nothing."""
    counts = Counter(finding.level for finding in findings)
    return ", ".join(f"{counts[level]} {level}" for level in ("stop", "hold", "caution", "note") if counts[level])
