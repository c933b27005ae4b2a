"""The part of the page that names rows: which are to blame, and the conflicts among them."""

from __future__ import annotations

import math

from ...pages.markup import (
    cards,
    counted,
    folded,
    name,
    names,
    number,
    numbered,
    section,
    table,
    text,
)
from ..explanation import Culprit, Explanation, Gap, Group, NamedViolator
from ..naming import listed
from . import words
from .drawings import NAMED, cycle
from .prose import prose, sentences

#: Groups in the table, at most; those to blame come first.
GROUPS = 300
#: Groups of one culprit named at once.
SHOWN = 12
#: Rows and columns of a conflict shown as a grid, at most.
GRID = 12

GROUPED_BY = {
    "component": "by constraint component",
    "name": "by the stem of their names",
    "pattern": "by equal coefficients, named after the first",
}


def blame(told: Explanation) -> str:
    """The section on groups of rows; empty where there are none."""
    if told.culprits and told.no_optimum is None:
        body = cards(_culprit(culprit, told.gap) for culprit in told.culprits)
    else:
        body = sentences([words.blame(told)])
    if told.groups and told.whole is None and told.no_optimum is None:
        body += _groups(told)
    several = "Each of these sets is enough by itself." if len(told.culprits) > 1 else ""
    return section("blame", "Which rows are to blame", body, several) if body else ""


def _culprit(culprit: Culprit, gap: Gap | None) -> str:
    body = f"<p><strong>{names(culprit.groups, SHOWN)}</strong></p>"
    body += sentences([words.culprit_words(culprit, gap), words.remains(culprit)])
    body += sentences([words.culprit_least(culprit)], "note")
    if len(culprit.groups) > SHOWN:
        body += folded("All these groups", f"<p>{names(culprit.groups)}</p>")
    if culprit.rows:
        body += folded(words.culprit_rows(culprit), f"<p>{names(culprit.rows)}</p>")
    return body


def _groups(told: Explanation) -> str:
    rows = [
        [
            name(group.name),
            number(group.size),
            "yes" if group.to_blame else "–",
            _without(told, group),
            text(_peculiar(group)),
        ]
        for group in sorted(told.groups, key=lambda group: not group.to_blame)[:GROUPS]
    ]
    rest = len(told.groups) - len(rows)
    caption = f"All rows, grouped {GROUPED_BY[told.grouped_by]}"
    caption += f"; {rest:,} more groups are not shown" if rest else ""
    head = ["group", "rows", "to blame", "without it", "what its rows are like"]
    return table("groups", caption, head, rows, numbers=[1], prose=[3, 4])


def _without(told: Explanation, group: Group) -> str:
    """What leaving a group out does, as far as that was found out."""
    for culprit in told.culprits:
        if culprit.groups == (group.name,):
            optimum = number(culprit.objective_without)
            known = math.isfinite(culprit.objective_without)
            return "the rest is proven whole" + (f", optimum {optimum}" if known else "")
        if group.name in culprit.groups:
            others = [each for each in culprit.groups if each != group.name]
            more = names(others) if len(others) < 4 else f"{len(others):,} other groups"
            return f"and without {more}, the rest is proven whole"
    return "–"


def _peculiar(group: Group) -> str:
    counts = (
        (group.beyond, "entry beyond 0 and ±1", "entries beyond 0 and ±1"),
        (group.broken_sides, "side that is not whole", "sides that are not whole"),
        (group.continuous, "entry at a continuous column", "entries at continuous columns"),
    )
    parts = [counted(count, one, many) for count, one, many in counts if count]
    parts += [f"{group.tight:,} tight at the optimum"] if group.tight else []
    parts += ["whole by themselves"] if group.certified_alone else []
    return ", ".join(parts)


def conflict(told: Explanation) -> str:
    """The section on rows and columns that conflict; empty where none are known."""
    if told.no_optimum is not None and told.no_optimum.names:
        body = sentences([words.conflict(told)]) + numbered(told.no_optimum.names)
        if told.no_optimum.kind == "unbounded":
            return section("conflict", "What grows", body)
        least = "None of them" if told.no_optimum.minimal else "Perhaps some of them"
        body += sentences([f"{least} could be left out."], "note")
        return section("conflict", "The conflict", body)
    if not told.violators or told.no_optimum is not None:
        return ""
    title = "Smallest conflicts" if len(told.violators) > 1 else "The smallest conflict"
    drawn = (_violator(f"conflict-{k}", each) for k, each in enumerate(told.violators, 1))
    return section("conflict", title, "".join(drawn))


def _violator(key: str, violator: NamedViolator) -> str:
    k = len(violator.row_names)
    title = listed(violator.groups, 4) if violator.groups else counted(k, "row")
    body = f"<h3>In {prose(title)}</h3>"
    if k == 1:
        return body + sentences([words.violator_words(violator)])
    least = (
        "every smaller part is harmless" if violator.minimal else "perhaps a part of it suffices"
    )
    size = f"{counted(k, 'row')} and {counted(k, 'column')}"
    body += sentences([f"{size} with determinant {violator.determinant}; {least}."])
    body += _cycle(key, violator) if violator.cycle else _grid(key, violator)
    names_ = (
        f'<div class="pair"><div><h4>Rows</h4>{numbered(violator.row_names)}</div>'
        f"<div><h4>Columns</h4>{numbered(violator.column_names)}</div></div>"
    )
    return body + (names_ if k <= NAMED else folded("Names of the rows and columns", names_))


def _cycle(key: str, violator: NamedViolator) -> str:
    """The cycle twice: with its names, and with numbers only for views too narrow for those."""
    named = len(violator.row_names) <= NAMED
    thick = "; a thick edge is a negative entry" if (violator.entries < 0).any() else ""
    return (
        f'<div class="wide-only">{cycle(key, violator, named)}</div>'
        f'<div class="small-only">{cycle(f"{key}-small", violator, False)}</div>'
        f'<p class="note">Squares are rows, circles are columns{thick}.</p>'
    )


def _grid(key: str, violator: NamedViolator) -> str:
    k = min(GRID, len(violator.row_names))
    rows = [
        [name(row), *(f"{entry:+d}" if entry else "·" for entry in entries)]
        for row, entries in zip(violator.row_names, violator.entries[:k, :k].tolist(), strict=False)
    ]
    caption = "Its entries, columns by their numbers below"
    caption += f"; the first {k} rows and columns" if k < len(violator.row_names) else ""
    head = ["row", *(str(j) for j in range(1, k + 1))]
    return table(f"{key}-grid", caption, head, rows, range(1, k + 1))
