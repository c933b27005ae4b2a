"""The sentences of an explanation, shared by its text, its page and its notebook form.

Each function returns plain text, empty where there is nothing to say.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from ..integrality.finding import Verdict
from ..pages.markup import counted, number, shortened, visible
from .explanation import Culprit, Explanation, Gap, Violator
from .remedy import Inequality, Remedy

#: Characters of a name within a sentence, at most.
NAME_WIDTH = 40

LABOUR = "Where a plan concerns people's shifts, labour rules and local agreements come first."


def headline(told: Explanation) -> str:
    """The one sentence to take away."""
    if told.no_optimum is not None:
        kind = told.no_optimum.kind
        return "No plan meets all rows" if kind == "infeasible" else "There is no best plan"
    if told.verdict is Verdict.PROVEN:
        return "Every vertex is whole: the integer declarations cost nothing"
    if told.fractional is None:
        return "Not known yet: the time ran out before the relaxation was solved"
    if told.fractional.count:
        return f"Fractional{_blamed(told)}"
    if told.verdict is Verdict.REFUTED:
        return "Whole at this objective, but not at every other one"
    return "Whole at this objective; about other objectives there is no proof"


def _blamed(told: Explanation) -> str:
    if not told.culprits:
        return " at the relaxation's optimum"
    return f" because of {listed(told.culprits[0].groups, 3)}"


def in_short(told: Explanation) -> list[tuple[str, str]]:
    """The answer as a handful of titled sentences, in the order of their use."""
    why = " ".join(told.whole.sentences[:3]) if told.whole is not None else ""
    breaks = told.whole.breakers[0] if told.whole is not None and told.whole.breakers else ""
    entries = [
        ("why", why),
        ("how bad", how_bad(told)),
        ("to blame", blame(told)),
        ("conflict", conflict(told)),
        ("remedy", best_remedy(told)),
        ("breaks by", breaks),
        ("rests on", standing(told)),
        ("left open", " ".join(told.cut_off[:2])),
    ]
    return [(title, sentence) for title, sentence in entries if sentence]


def how_bad(told: Explanation) -> str:
    """How many columns are fractional, and how far the relaxation is from a whole plan."""
    if told.no_optimum is not None:
        return f"{told.no_optimum.sentence.rstrip('.')}."
    parts = []
    if told.fractional is not None:
        integers = counted(told.fractional.integers, "integer column")
        count = told.fractional.count
        parts.append(f"{count:,} of {integers} {'is' if count == 1 else 'are'} fractional.")
        if told.fractional.worst_name is not None:
            worst = told.fractional.worst_name
            parts.append(f"Furthest from whole: {short(worst)} = {told.fractional.worst_value}.")
    if told.gap is not None:
        parts.append(gap_words(told.gap))
    return " ".join(parts)


def gap_words(gap: Gap) -> str:
    """What wholeness costs, and how far that is known."""
    bound = f"The relaxation's optimum is {number(gap.declared_bound)}"
    if math.isnan(gap.declared_bound):
        return ""
    if gap.plan_status == "infeasible":
        return f"{bound}; no whole plan exists."
    if math.isnan(gap.plan):
        looked = gap.plan_status != "unknown"
        return f"{bound}; " + (
            "no whole plan was found in time."
            if looked
            else "the best whole plan was not looked for."
        )
    if gap.exact and gap.absolute <= 1e-9 * max(1.0, abs(gap.plan)):
        return f"{bound}, and so is the best whole plan's."
    apart = f"{number(gap.absolute)} ({gap.relative:.2%})"
    if gap.exact:
        return f"{bound}, the best whole plan's {number(gap.plan)}: {apart} apart."
    return f"{bound}, the best plan found in time {number(gap.plan)}: at most {apart} apart."


def blame(told: Explanation) -> str:
    """Which groups of rows are to blame."""
    if told.no_optimum is not None:
        groups = told.no_optimum.groups
        if not groups:
            return ""
        alone = "" if told.no_optimum.groups_minimal else " (perhaps fewer do)"
        return f"{listed(groups, 6)} conflict by themselves{alone}."
    if told.whole is not None or not told.groups:
        return ""
    if not told.culprits:
        return "No set of row groups was found without which the rest is certified whole."
    return " ".join(culprit_words(culprit) for culprit in told.culprits[:1])


def culprit_words(culprit: Culprit) -> str:
    """What leaving a culprit out does."""
    sentence = f"Without {listed(culprit.groups, 6)} what is left is proven whole"
    if culprit.structures:
        sentence += f" ({', '.join(culprit.structures)})"
    if not math.isnan(culprit.objective_without):
        sentence += f"; its optimum is {number(culprit.objective_without)}"
        if not math.isnan(culprit.price):
            sentence += f", so these rows cost {number(culprit.price)}"
    return f"{sentence}."


def conflict(told: Explanation) -> str:
    """The smallest conflict, in names."""
    if told.no_optimum is not None:
        names = told.no_optimum.names
        if not names:
            return ""
        verb = "conflict" if told.no_optimum.kind == "infeasible" else "grow without end"
        return f"{listed(names, 8)} {verb}."
    if not told.violators:
        return ""
    return violator_words(told.violators[0])


def violator_words(violator: Violator) -> str:
    """What a violator is, and the rows and columns along it."""
    k = len(violator.row_names)
    if k == 1:
        row, column = short(violator.row_names[0]), short(violator.column_names[0])
        return f"Row {row} has the coefficient {violator.entries[0, 0]} at {column}."
    rows, columns = listed(violator.row_names, 5), listed(violator.column_names, 5)
    shape = "on one cycle" if violator.cycle else "in one square"
    least = "" if violator.minimal else ", not known to be smallest"
    return (
        f"{k} rows and {k} columns {shape}, determinant {violator.determinant}{least}: "
        f"rows {rows}; columns {columns}."
    )


def best_remedy(told: Explanation) -> str:
    """The first remedy and what it does."""
    if not told.remedies:
        return ""
    remedy = told.remedies[0]
    more = len(told.remedies) - 1
    others = f" {counted(more, 'other')} below." if more else ""
    return f"{as_sentence(remedy.title)} {effect(remedy)}{others}"


def effect(remedy: Remedy) -> str:
    """What a remedy does to the bound and to the number of fractional columns."""
    parts = []
    before, after = remedy.bound_before, remedy.bound_after
    if not math.isnan(before) and not math.isnan(after):
        same = number(before) == number(after)
        parts.append(
            f"the bound stays at {number(after)}"
            if same
            else f"the bound goes from {number(before)} to {number(after)}"
        )
    if remedy.fractional_before is not None and remedy.fractional_after is not None:
        parts.append(
            f"{remedy.fractional_before:,} fractional columns become {remedy.fractional_after:,}"
        )
    return as_sentence("; ".join(parts))


def standing(told: Explanation) -> str:
    """What the answer rests on: a proof, a witness, samples, or nothing yet."""
    verdict = told.verdict
    if verdict is Verdict.PROVEN:
        return "Proven: by a certificate that an independent checker accepts."
    if verdict is Verdict.REFUTED:
        return "Refuted: a fractional vertex is known exactly."
    if verdict is Verdict.SAMPLED:
        k = sum(block.samples for block in told.finding.blocks)
        return f"This rests on {counted(k, 'sampled vertex', 'sampled vertices')}: no proof."
    return "Undecided: neither a proof nor a fractional vertex."


def sampled_shares(told: Explanation) -> str:
    """What was seen at sampled vertices, said as what it is."""
    if told.fractional is None or not told.fractional.samples:
        return ""
    k, bad = told.fractional.samples, told.fractional.samples_fractional
    return (
        f"Of {counted(k, 'sampled vertex', 'sampled vertices')} {bad:,} had a fractional column. "
        "That is a sample, no proof."
    )


def listed(names: Sequence[str], most: int) -> str:
    """Names as a clause, at most so many of them.

    Examples
    --------
    >>> listed(["rent", "shelves", "vans"], 3), listed(["rent", "shelves", "vans"], 1)
    ('rent, shelves and vans', 'rent and 2 more')
    """
    shown = [short(name) for name in names[:most]]
    rest = len(names) - len(shown)
    if rest:
        shown.append(f"{rest:,} more")
    return shown[0] if len(shown) == 1 else f"{', '.join(shown[:-1])} and {shown[-1]}"


def short(name: str) -> str:
    """A name fit for a sentence."""
    return shortened(visible(name), NAME_WIDTH)


def inequality(row: Inequality, most: int = 8) -> str:
    """A row as people write it, at most so many of its terms."""
    terms = ""
    pairs = list(zip(row.coefficients.tolist(), row.column_names, strict=True))
    for coefficient, name in pairs[:most]:
        sign = "-" if coefficient < 0 else "+" if terms else ""
        size = "" if abs(coefficient) == 1 else f"{number(abs(coefficient))} "
        terms += f" {sign} {size}{short(name)}" if terms else f"{sign}{size}{short(name)}"
    if len(pairs) > most:
        terms += f" + {len(pairs) - most:,} more terms"
    if row.lower == row.upper:
        return f"{short(row.name)}: {terms} = {number(row.upper)}"
    least = f"{number(row.lower)} <= " if math.isfinite(row.lower) else ""
    greatest = f" <= {number(row.upper)}" if math.isfinite(row.upper) else ""
    return f"{short(row.name)}: {least}{terms}{greatest}"


def as_sentence(clause: str) -> str:
    """A clause with a capital at its beginning and a stop at its end.

    Examples
    --------
    >>> as_sentence("round the sides inwards"), as_sentence("")
    ('Round the sides inwards.', '')
    """
    clause = clause.strip().rstrip(".")
    return f"{clause[:1].upper()}{clause[1:]}." if clause else ""
