"""An explanation as one HTML page that needs nothing else: no network, no script."""

from __future__ import annotations

import math

from ...pages.drawing import PATTERNS, bars
from ...pages.frame import page
from ...pages.markup import (
    NAMES,
    cards,
    counted,
    figures,
    folded,
    name,
    names,
    number,
    section,
    table,
    text,
)
from ..explanation import Explanation, Whole
from . import words
from .page_matrix import blocks
from .page_remedies import remedies
from .page_rows import blame, conflict
from .prose import sentences

#: Variable components in the table, at most.
COMPONENTS = 300


def to_html(told: Explanation, subject: str | None = None) -> str:
    """Return the explanation as one self-contained HTML page.

    Parameters
    ----------
    told : Explanation
    subject : str, optional
        What was explained; the name of the Pyomo model where not given.

    Examples
    --------
    >>> from pyomo_latpath.explain.explain import explain
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> caves = LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
    ...                                col_upper=1, cost=[5, 3])
    >>> "<h1>Every vertex is whole" in to_html(explain(caves), "two caves")
    True
    """
    if subject is None:
        subject = getattr(told.model, "name", None) or "a model"
    parts = (
        f'<svg class="defs" width="0" height="0" aria-hidden="true">{PATTERNS}</svg>',
        _figures(told),
        _whole(told),
        _how_bad(told),
        blame(told),
        conflict(told),
        remedies(told),
        _reasons(told),
        blocks(told),
        _rests(told),
    )
    return page(
        words.headline(told),
        f"latpath explain: {subject}",
        "\n".join(part for part in parts if part),
        sheets=("explanation.css",),
        footer=(words.LABOUR,),
    )


def _figures(told: Explanation) -> str:
    pairs = [("verdict", text(told.verdict.value))]
    if told.fractional is not None:
        share = f"{told.fractional.count:,} of {told.fractional.integers:,}"
        pairs.append(("integer columns fractional", share))
    if told.gap is not None and math.isfinite(told.gap.plan - told.gap.declared_bound):
        gap = f"{number(float(f'{told.gap.absolute:.6g}'))} ({told.gap.relative:.2%})"
        pairs.append(("gap" if told.gap.exact else "gap, at most", gap))
    sizes = (("rows", told.rows), ("columns", told.columns), ("nonzeros", told.nonzeros))
    return figures([*pairs, *((what, number(size)) for what, size in sizes)])


def _whole(told: Explanation) -> str:
    if told.whole is None:
        return ""
    body = sentences([*map(words.as_sentence, told.whole.sentences), words.how_bad(told)])
    for title, clauses in (
        ("What would break it", told.whole.breakers),
        ("What may change", told.whole.keepers),
    ):
        if clauses:
            body += f"<h3>{title}</h3>{sentences(map(words.as_sentence, clauses))}"
    return section("whole", "Why every vertex is whole", body + _times(told.whole))


def _times(whole: Whole) -> str:
    if math.isnan(whole.path_seconds) or math.isnan(whole.highs_seconds):
        return ""
    pairs = [("path route", whole.path_seconds), ("branch and bound", whole.highs_seconds)]
    longer = "" if whole.highs_ended else "Branch and bound was cut off; it takes longer than this."
    return bars("times", "Seconds of one solve", pairs) + sentences([longer], "note")


def _how_bad(told: Explanation) -> str:
    if told.whole is not None:
        return ""
    body = sentences([words.how_bad(told)])
    if told.fractional is not None:
        rows = [
            [
                name(each.name),
                number(each.integers),
                number(each.fractional),
                "–"
                if each.worst_name is None
                else f"{name(each.worst_name)} = {text(words.fraction(each.worst_value))}",
                number(each.sampled),
            ]
            for each in told.fractional.components[:COMPONENTS]
        ]
        rest = len(told.fractional.components) - len(rows)
        caption = "Where the optimum is fractional, by variable component"
        caption += f"; {rest:,} more are not shown" if rest else ""
        head = ["variables", "integer", "fractional", "furthest from whole", "in samples"]
        body += (
            table("components", caption, head, rows, numbers=(1, 2, 4), prose=[3]) if rows else ""
        )
        body += sentences([words.sampled_shares(told)], "note")
    body += _witness(told)
    title = "No best plan" if told.no_optimum is not None else "How far from whole"
    return section("bad", title, body) if body else ""


def _witness(told: Explanation) -> str:
    """The exact fractional vertex, as far as it is fractional."""
    if told.witness is None:
        return ""
    names_, pairs = (
        told.form.col_names,
        zip(told.witness.columns.tolist(), told.witness.values, strict=True),
    )
    split = [(names_[j], value) for j, value in pairs if value.denominator > 1]
    shown = ", ".join(
        f"{name(column)} = {text(words.fraction(value))}" for column, value in split[:NAMES]
    )
    rest = len(split) - NAMES
    shown += f" and {rest:,} more" if rest > 0 else ""
    title = f"An exact vertex with {counted(len(split), 'fractional column')}"
    return folded(title, f"<p>{shown}</p>")


def _reasons(told: Explanation) -> str:
    if not told.reasons:
        return ""
    items = (
        sentences([reason.sentence])
        + (f"<p>{names(reason.examples)}</p>" if reason.examples else "")
        for reason in told.reasons
    )
    return section("reasons", "Side reasons", cards(items))


def _rests(told: Explanation) -> str:
    stopped = "The work was interrupted; this is what was found by then."
    body = sentences([words.standing(told), stopped if told.interrupted else ""])
    if told.cut_off:
        body += f"<h3>Left open</h3>{sentences(map(words.as_sentence, told.cut_off))}"
    spent = ", ".join(f"{part} {seconds:.2f}" for part, seconds in told.seconds.items())
    body += sentences([f"Seconds spent: {spent}." if spent else ""], "note")
    return section("rests", "What this rests on", body)
