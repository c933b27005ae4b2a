"""The sentences of an explanation, shared by its text, its page and its notebook form.

Each function returns plain text, empty where there is nothing to say.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from fractions import Fraction

from ...integrality.finding import Verdict
from ...pages.markup import counted, number
from ..explanation import Culprit, Explanation, Fractional, Gap, NamedViolator
from ..naming import FRACTION_WIDTH, coefficient, listed, quoted, short
from ..remedies.remedy import Inequality, Remedy

LABOUR = "Where a plan concerns people's shifts, labour rules and local agreements come first."
#: Structures whose names say little.
STRUCTURES = {
    "conetwork": "transposed network",
    "incidence": "incidence: two entries at most in each row or column",
    "interval": "interval: consecutive ones",
    "unimodular": "unimodular system of equations",
}
HOLDS = (
    "Remedies hold for the rows and bounds that were explained, whatever the costs; once others "
    "have changed, explain the model again."
)


def headline(told: Explanation) -> str:
    """The one sentence to take away."""
    if told.no_optimum is not None:
        kind = told.no_optimum.kind
        return "No plan meets all rows" if kind == "infeasible" else "There is no best plan"
    if told.integers == 0 and told.verdict is Verdict.PROVEN:
        return "A linear program: no column is declared integer"
    rounding = _rounded(told.gap) or any(remedy.kind == "round" for remedy in told.remedies)
    if told.verdict is Verdict.PROVEN and rounding:
        return "Every vertex is whole once sides and bounds are rounded inwards"
    if told.verdict is Verdict.PROVEN:
        return "Every vertex is whole: the integer declarations cost nothing"
    if told.fractional is None:
        return "Not known yet: the time ran out before the relaxation was solved"
    if told.fractional.count:
        return _blamed(told)
    if told.verdict is Verdict.REFUTED:
        return "Whole at this objective, but not at every other one"
    return "Whole at this objective; about other objectives there is no proof"


def _rounded(gap: Gap | None) -> bool:
    """Whether rounding sides and bounds inwards alone moves the relaxation's optimum."""
    if gap is None or math.isnan(gap.rounded_bound):
        return False
    return number(gap.declared_bound) != number(gap.rounded_bound)


def _blamed(told: Explanation) -> str:
    telling = [culprit.groups for culprit in told.culprits if not holds_all(culprit)]
    if not telling:
        return "The relaxation is fractional at its optimum"
    groups = telling[0]
    few = len(groups) <= 3
    return "Fractional because of " + (
        listed(groups, 3) if few else counted(len(groups), "group") + " of rows"
    )


def holds_all(culprit: Culprit) -> bool:
    """Whether a culprit is all that ties integer columns to others, and so singles out nothing."""
    return culprit.structures == ("trivial",)


def in_short(told: Explanation) -> list[tuple[str, str]]:
    """The answer as a handful of titled sentences, in the order of their use."""
    why = breaks = ""
    if told.whole is not None:
        why = " ".join(map(as_sentence, told.whole.sentences[:3]))
        breaks = " ".join(map(as_sentence, told.whole.breakers[:1]))
    entries = [
        ("why", why),
        (_bad_title(told), how_bad(told)),
        ("to blame", blame(told)),
        ("conflict", conflict(told)),
        ("remedy", best_remedy(told)),
        ("breaks by", breaks),
        ("rests on", "" if told.no_optimum is not None else standing(told)),
        ("left open", " ".join(map(as_sentence, told.cut_off[:2]))),
    ]
    return [(title, sentence) for title, sentence in entries if sentence]


def _bad_title(told: Explanation) -> str:
    if told.no_optimum is not None:
        return "why"
    return "how bad" if told.fractional is not None and told.fractional.count else "optimum"


def how_bad(told: Explanation) -> str:
    """How many columns are fractional, and how far the relaxation is from a whole plan."""
    if told.no_optimum is not None:
        return as_sentence(told.no_optimum.sentence)
    parts = []
    if told.fractional is not None and told.fractional.integers:
        parts.append(_how_many(told.fractional))
        if told.fractional.worst_name is not None:
            worst = told.fractional.worst_name
            parts.append(
                f"Furthest from whole: {quoted(worst)} = {fraction(told.fractional.worst_value)}."
            )
    if told.gap is not None:
        parts.append(gap_words(told.gap))
    return " ".join(parts)


def _how_many(fractional: Fractional) -> str:
    """How many columns are fractional, before and after rounding where that differs."""
    count, before = fractional.count, fractional.declared
    told = f"{count:,} of {counted(fractional.integers, 'integer column')} "
    told += f"{'is' if 1 in (count, fractional.integers) else 'are'} fractional"
    if before is None or before == count:
        return f"{told}."
    return f"{told}, {before:,} before sides and bounds are rounded inwards."


def gap_words(gap: Gap) -> str:
    """What wholeness costs, and how far that is known."""
    bound = f"The relaxation's optimum is {number(gap.declared_bound)}"
    if _rounded(gap):
        bound += f" ({number(gap.rounded_bound)} with sides and bounds rounded inwards)"
    if math.isnan(gap.declared_bound):
        return ""
    if gap.plan_status == "infeasible":
        return f"{bound}; no whole plan exists."
    if math.isnan(gap.plan):
        looked = gap.plan_status != "unknown"
        return f"{bound}; " + (
            f"no whole plan was found {_when(gap)}."
            if looked
            else "the best whole plan was not looked for."
        )
    if costs_nothing(gap):
        return f"{bound}, and so is the best whole plan's."
    apart = f"{number(gap.absolute)} ({gap.relative:.2%})"
    if gap.exact:
        return f"{bound}, the best whole plan's {number(gap.plan)}: {apart} apart."
    return f"{bound}, the best plan found {_when(gap)} {number(gap.plan)}: at most {apart} apart."


def _when(gap: Gap) -> str:
    return "by then" if gap.plan_status == "interrupted" else "in time"


def costs_nothing(gap: Gap) -> bool:
    """Whether the best whole plan is as good as the relaxation's optimum."""
    return gap.exact and gap.absolute <= 1e-9 * max(1.0, abs(gap.plan))


def blame(told: Explanation) -> str:
    """Which groups of rows are to blame."""
    if told.no_optimum is not None:
        groups = told.no_optimum.groups
        if not groups:
            return ""
        fewer = "" if told.no_optimum.groups_minimal else " (perhaps fewer do)"
        return f"{_conflicting(groups)}{fewer}."
    if told.whole is not None or not told.groups:
        return ""
    if not told.culprits:
        return "No set of row groups was found without which the rest is certified whole."
    return culprit_words(told.culprits[0], told.gap)


def culprit_words(culprit: Culprit, gap: Gap | None) -> str:
    """What leaving a culprit out does, beside what wholeness costs."""
    groups = listed(culprit.groups, 6)
    if holds_all(culprit):
        tie = "ties" if len(culprit.groups) == 1 else "tie"
        return f"Only {groups} {tie} integer columns to others: no part of the model stands out."
    sentence = f"Without {groups} what is left is proven whole"
    if culprit.structures:
        sentence += f" ({', '.join(map(structure, culprit.structures))})"
    if math.isinf(culprit.objective_without):
        return f"{sentence}; then there is no best plan, only better ones without end."
    if not math.isnan(culprit.objective_without):
        sentence += f"; its optimum is {number(culprit.objective_without)}"
        if not math.isnan(culprit.price):
            sentence += _priced(culprit.price, free=gap is not None and costs_nothing(gap))
    return f"{sentence}."


def _priced(price: float, free: bool) -> str:
    """What the rows of a culprit cost, not to be taken for what wholeness costs."""
    if not free or not price:
        return f", so these rows cost {number(price) if price else 'nothing'}"
    return (
        f", so leaving these rows out would change the optimum by {number(price)}; wholeness costs "
        "nothing at this objective"
    )


def structure(name: str) -> str:
    """A structure as those call it who do not know its name here."""
    return STRUCTURES.get(name, name)


def remains(culprit: Culprit) -> str:
    """What is left without a culprit."""
    return f"What is left: {culprit.remains.rstrip('.')}." if culprit.remains else ""


def culprit_rows(culprit: Culprit) -> str:
    """How many of a culprit's rows it takes."""
    enough = f"It is enough to leave out {counted(len(culprit.rows), 'row')}"
    if len(culprit.rows) == 1:
        return enough
    return f"{enough} ({'each of them must go' if culprit.rows_minimal else 'perhaps fewer'})"


def culprit_least(culprit: Culprit) -> str:
    """Whether fewer groups would do."""
    if culprit.smallest:
        return "No set of fewer groups does."
    return "None of these groups can stay; whether fewer groups do was not settled."


def conflict(told: Explanation) -> str:
    """The smallest conflict, in names."""
    if told.no_optimum is not None:
        names = told.no_optimum.names
        if not names:
            return ""
        if told.no_optimum.kind == "infeasible":
            return f"{_conflicting(names)}."
        return f"{listed(names, 8)} {'moves' if len(names) == 1 else 'move'} without end."
    if not told.violators:
        return ""
    return violator_words(told.violators[0])


def _conflicting(names: Sequence[str]) -> str:
    if len(names) == 1:
        return f"{quoted(names[0])} cannot be met, even by itself"
    return f"{listed(names, 8)} conflict"


def violator_words(violator: NamedViolator) -> str:
    """What a violator is, and the rows and columns along it."""
    k = len(violator.row_names)
    if k == 1:
        row, column = quoted(violator.row_names[0]), quoted(violator.column_names[0])
        entry = coefficient(float(violator.entries[0, 0]))
        return f"Row {row} has the coefficient {entry} at {column}."
    rows, columns = listed(violator.row_names, 5), listed(violator.column_names, 5)
    shape = "on one cycle" if violator.cycle else "in one square"
    least = "" if violator.minimal else ", not known to be smallest"
    return (
        f"{k} rows and {k} columns {shape}, determinant {violator.determinant}{least}: "
        f"rows {rows}; columns {columns}."
    )


def best_remedy(told: Explanation) -> str:
    """The remedy that does most by itself, and what it does."""
    if not told.remedies:
        return ""
    sign = 1 if told.sense == "min" else -1
    gains = [sign * (each.bound_after - each.bound_before) for each in told.remedies]
    best = max(range(len(gains)), key=lambda k: (not math.isnan(gains[k]), gains[k], -k))
    words = f"{as_sentence(told.remedies[best].title)} {effect(told.remedies[best])}"
    others = len(told.remedies) - 1
    if not others:
        return words
    together = told.remedies[-1].bound_together
    bound = "" if math.isnan(together) else f"; all together bring the bound to {number(together)}"
    return f"{words} There {'is 1 more' if others == 1 else f'are {others} more'}{bound}."


def effect(remedy: Remedy) -> str:
    """What a remedy by itself does to the bound and to the number of fractional columns."""
    parts = []
    before, after = number(remedy.bound_before), number(remedy.bound_after)
    if not math.isnan(remedy.bound_before) and not math.isnan(remedy.bound_after):
        moved = f"the bound goes from {before} to {after}"
        parts.append(f"the bound stays at {after}" if before == after else moved)
    was, now = remedy.fractional_before, remedy.fractional_after
    if was is not None and now is not None and (was or now):
        columns, s = counted(was, "fractional column"), "s" if was == 1 else ""
        parts.append(f"{columns} stay{s}" if was == now else f"{columns} become{s} {now:,}")
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
    if told.verdict is Verdict.PROVEN or told.fractional is None or not told.fractional.samples:
        return ""
    k, bad = told.fractional.samples, told.fractional.samples_fractional
    return (
        f"Of {counted(k, 'sampled vertex', 'sampled vertices')} {bad:,} had a fractional column. "
        "That is a sample, no proof."
    )


def fraction(value: Fraction | None) -> str:
    """A fraction, or about what it is where it takes too long to read.

    Examples
    --------
    >>> fraction(Fraction(7, 15)), fraction(Fraction(10**30 + 1, 10**30)), fraction(None)
    ('7/15', 'about 1', '–')
    """
    if value is None:
        return "–"
    return str(value) if len(str(value)) <= FRACTION_WIDTH else f"about {float(value):.6g}"


def inequality(row: Inequality, most: int = 8) -> str:
    """A row as people write it, at most so many of its terms."""
    terms = ""
    pairs = list(zip(row.coefficients.tolist(), row.column_names, strict=True))
    for factor, name in pairs[:most]:
        sign = "-" if factor < 0 else "+" if terms else ""
        size = "" if abs(factor) == 1 else f"{number(abs(factor))} "
        terms += f" {sign} {size}{short(name)}" if terms else f"{sign}{size}{short(name)}"
    if len(pairs) > most:
        terms += f" + {counted(len(pairs) - most, 'more term')}"
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
