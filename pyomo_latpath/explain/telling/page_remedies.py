"""The part of the page on what can be done, each remedy with its effect."""

from __future__ import annotations

import math

from ...pages.drawing import bars
from ...pages.markup import cards, counted, folded, names, section
from ..explanation import Explanation
from ..remedies.remedy import Remedy
from . import words
from .prose import prose, sentences

#: Bars of remedies together, at most.
BARS = 12


def remedies(told: Explanation) -> str:
    """The section on remedies; empty where there are none."""
    if not told.remedies:
        return ""
    plan = math.nan if told.gap is None else told.gap.plan
    body = _together(told.remedies, plan) if len(told.remedies) > 1 else ""
    body += cards(_remedy(f"remedy-{k}", each, plan) for k, each in enumerate(told.remedies, 1))
    lead = "Each was checked before it is shown, goes alone, and goes with those before it."
    return section("remedies", "What can be done", body + sentences([words.HOLDS], "note"), lead)


def _together(those: tuple[Remedy, ...], plan: float) -> str:
    """How the gap shrinks from one remedy to the next."""
    told = [(f"{k} together", each.bound_together) for k, each in enumerate(those[:BARS], 1)]
    bounds = [("as it is", those[0].bound_before), ("with the first", those[0].bound_together)]
    return _gap_bars("together", [*bounds, *told[1:]], plan)


def _remedy(key: str, remedy: Remedy, plan: float) -> str:
    body = f"<h3>{prose(words.as_sentence(remedy.title).rstrip('.'))}</h3>"
    body += sentences([remedy.sentence, words.effect(remedy)])
    bounds = [("as it is", remedy.bound_before), ("with it alone", remedy.bound_after)]
    if remedy.bound_before != remedy.bound_after:
        body += _gap_bars(key, bounds, plan)
    body += sentences([f"Checked: {remedy.verified}" if remedy.verified else ""], "note")
    if remedy.inequalities:
        shown = sentences(words.inequality(each) for each in remedy.inequalities[:BARS])
        rest = len(remedy.inequalities) - BARS
        shown += sentences([f"and {rest:,} more"] if rest > 0 else [])
        body += folded(counted(len(remedy.inequalities), "new row"), shown)
    if remedy.names:
        touched = counted(len(remedy.names), "row or column", "rows and columns")
        body += folded(f"{touched} touched", f"<p>{names(remedy.names)}</p>")
    return body


def _gap_bars(key: str, bounds: list[tuple[str, float]], plan: float) -> str:
    """What is left between each bound and the best known plan; empty where that is not known."""
    gaps = [(words_, abs(plan - bound)) for words_, bound in bounds]
    if not all(math.isfinite(gap) for _, gap in gaps) or not max(gap for _, gap in gaps):
        return ""
    return bars(key, "Gap to the best known whole plan", gaps)
