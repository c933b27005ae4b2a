"""An explanation as text: the answer on one screen, then the details."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Iterator, Sequence

from ...pages.markup import counted, number, shortened, visible
from ..explanation import Culprit, Explanation, Gap, NamedViolator
from ..naming import listed, short
from ..remedies.remedy import Remedy
from . import words

WIDTH, INDENT = 80, 12
#: Lines of an entry on the first screen, and lines of a list further down.
ENTRY_LINES, LIST_LINES = 4, 20
#: Rows and columns of a conflict shown as a grid.
GRID = 12


def to_text(told: Explanation) -> str:
    """Return the answer on lines of at most 80 columns; the first 24 of them say it all.

    Examples
    --------
    >>> from pyomo_latpath.explain.explain import explain
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> caves = LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
    ...                                col_upper=1, cost=[5, 3])
    >>> to_text(explain(caves)).splitlines()[0]
    'Every vertex is whole: the integer declarations cost nothing'
    """
    lines = textwrap.wrap(words.headline(told), WIDTH, max_lines=2, placeholder=" …")
    for title, sentence in words.in_short(told):
        lines += _entry(title, sentence, ENTRY_LINES)
    lines += _entry("size", _size(told))
    details = list(_details(told))
    return "\n".join([*lines, *details])


def _size(told: Explanation) -> str:
    return (
        f"{counted(told.rows, 'row')}, {counted(told.columns, 'column')} "
        f"({told.integers:,} integer), {counted(told.nonzeros, 'nonzero')}"
    )


def _details(told: Explanation) -> Iterator[str]:
    """Everything else, under headings."""
    if told.whole is not None:
        yield from _part("What would break it", map(words.as_sentence, told.whole.breakers))
        yield from _part("What may change", map(words.as_sentence, told.whole.keepers))
    elif told.no_optimum is not None:
        names = [short(name) for name in told.no_optimum.names]
        title = "Conflicting" if told.no_optimum.kind == "infeasible" else "Growing without end"
        yield from _part(title, [", ".join(names)])
    else:
        yield from _fractional(told)
    for k, remedy in enumerate(told.remedies, 1):
        yield from _part(f"Remedy {k} of {len(told.remedies)}", _remedy(remedy))
    yield from _part("Side reasons", [reason.sentence for reason in told.reasons])
    yield from _part("Blocks", _blocks(told))
    yield from _part("Samples", [words.sampled_shares(told)])
    yield from _part("Left open", map(words.as_sentence, told.cut_off))
    yield from _part("Please note", [words.HOLDS if told.remedies else "", words.LABOUR])


def _fractional(told: Explanation) -> Iterator[str]:
    yield from _components(told)
    yield from _groups(told)
    for k, culprit in enumerate(told.culprits, 1):
        yield from _part(f"Culprit {k} of {len(told.culprits)}", _culprit(culprit, told.gap))
    for k, violator in enumerate(told.violators, 1):
        yield from _violator(f"Conflict {k} of {len(told.violators)}", violator)


def _components(told: Explanation) -> Iterator[str]:
    if told.fractional is None or not told.fractional.count:
        return
    head = ["variables", "integer", "fractional", "furthest"]
    rows = [
        [
            each.name,
            number(each.integers),
            number(each.fractional),
            words.fraction(each.worst_value),
        ]
        for each in told.fractional.components
        if each.fractional
    ]
    yield from _table("Where the optimum is fractional", head, rows)


def _groups(told: Explanation) -> Iterator[str]:
    head = ["group", "rows", "beyond ±1", "side broken", "tight", "to blame"]
    rows = [
        [
            group.name,
            *map(number, (group.size, group.beyond, group.broken_sides, group.tight)),
            "yes" if group.to_blame else "-",
        ]
        for group in sorted(told.groups, key=lambda group: not group.to_blame)
    ]
    yield from _table("Groups of rows", head, rows)


def _culprit(culprit: Culprit, gap: Gap | None) -> list[str]:
    told = [words.culprit_words(culprit, gap), words.remains(culprit)]
    told.append(words.culprit_least(culprit))
    if culprit.rows:
        told.append(f"{words.culprit_rows(culprit)}: {listed(culprit.rows, 12)}.")
    return told


def _violator(title: str, violator: NamedViolator) -> Iterator[str]:
    yield from _part(title, [words.violator_words(violator)])
    k = len(violator.row_names)
    if not 1 < k <= GRID:
        return
    head = ["", *(str(j) for j in range(1, k + 1))]
    rows = [
        [name, *(f"{entry:+d}" if entry else "." for entry in entries)]
        for name, entries in zip(violator.row_names, violator.entries.tolist(), strict=True)
    ]
    yield from _lines_of_table(head, rows)
    columns = [f"{j} {short(name)}" for j, name in enumerate(violator.column_names, 1)]
    yield from _wrapped(f"columns: {', '.join(columns)}")


def _remedy(remedy: Remedy) -> list[str]:
    told = [words.as_sentence(visible(remedy.title)), remedy.sentence, words.effect(remedy)]
    told += [f"Checked: {remedy.verified}"] if remedy.verified else []
    told += [words.inequality(row) for row in remedy.inequalities[:3]]
    rest = len(remedy.inequalities) - 3
    return told + ([f"and {counted(rest, 'more new row', 'more new rows')}"] if rest > 0 else [])


def _blocks(told: Explanation) -> list[str]:
    largest = sorted(told.blocks, key=lambda block: -block.nonzeros)[:6]
    lines = [
        f"{counted(block.rows, 'row')}, {counted(block.columns, 'column')}: "
        f"{words.structure(block.structure or block.verdict.value)}; {block.sentence}"
        for block in largest
    ]
    rest = len(told.blocks) - len(largest)
    return lines + ([f"and {counted(rest, 'smaller block')}"] if rest else [])


def _entry(title: str, sentence: str, most: int | None = None) -> list[str]:
    lines = textwrap.wrap(visible(sentence), WIDTH - INDENT, max_lines=most, placeholder=" …")
    return [f"{title if not k else '':<{INDENT}}{line}" for k, line in enumerate(lines)]


def _part(title: str, sentences: Iterable[str]) -> Iterator[str]:
    told = [sentence for sentence in sentences if sentence]
    if not told:
        return
    yield from ("", title)
    for sentence in told:
        yield from _wrapped(sentence)


def _wrapped(sentence: str) -> list[str]:
    return textwrap.wrap(visible(sentence), WIDTH, initial_indent="  ", subsequent_indent="    ")


def _table(title: str, head: Sequence[str], rows: Sequence[Sequence[str]]) -> Iterator[str]:
    if not rows:
        return
    yield from ("", title)
    yield from _lines_of_table(head, rows[:LIST_LINES])
    if len(rows) > LIST_LINES:
        yield f"  and {len(rows) - LIST_LINES:,} more"


def _lines_of_table(head: Sequence[str], rows: Sequence[Sequence[str]]) -> Iterator[str]:
    """Cells in columns, the first as wide as there is room."""
    cells = [list(head), *([short(row[0]), *row[1:]] for row in rows)]
    widths = [max(map(len, column)) for column in zip(*cells, strict=True)]
    widths[0] = min(widths[0], WIDTH - 2 - sum(width + 2 for width in widths[1:]))
    for first, *others in cells:
        right = "".join(
            f"  {cell:>{width}}" for cell, width in zip(others, widths[1:], strict=True)
        )
        yield f"  {shortened(first, widths[0]):<{widths[0]}}{right}".rstrip()
