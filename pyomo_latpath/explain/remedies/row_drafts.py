"""Drafts that make single rows and bounds say more: rounded, shrunk and split."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from ...deadline import Deadline
from ...forms.linear_form import LinearForm
from ...forms.normalise import NormalForm
from ...forms.numbers import Integers
from ...highs import Basis
from ...pages.markup import number
from ..naming import quoted
from ..stems import column_stems, row_stems
from ..telling.words import inequality
from .big_m import Prober, loose_state, shrunk, tightened
from .drafts import Draft
from .lines import Line, columns_of, float_above, float_below, lines_of, outlook_of, size
from .remedy import BoundChange, Inequality, RowChange
from .rounding import Rounded, rounded_inwards
from .splitting import Split, split

#: Rows that splits may bring, at most; a longer list helps nobody.
MOST_ROWS = 20_000
#: Linear programs in a row that shrink nothing, after which no further ones are solved.
PATIENCE = 5


def rounding_drafts(normal: NormalForm) -> Iterator[Draft]:
    """Round sides and bounds inwards."""
    found = rounded_inwards(normal)
    if found.rows.size:
        yield from _rounded_rows(normal.form, found)
    if found.columns.size:
        yield from _rounded_bounds(normal.form, found)


def tightening_drafts(
    normal: NormalForm, first: Integers, near: Basis | None, deadline: Deadline
) -> Iterator[Draft]:
    """Shrink the coefficients of binary columns as far as is proven.

    Parameters
    ----------
    normal : NormalForm
    first : ndarray, int64
        Rows (of the form) for which linear programs may be solved, in this order.
    near : Basis or None
        Of the normalised relaxation, for these programs to start from.
    deadline : Deadline
    """
    form = normal.form
    columns, outlook = columns_of(form), outlook_of(form)
    probable = outlook.one_sided & outlook.switched & np.isin(np.arange(form.shape[0]), first)
    before: dict[int, Line] = {}
    after: dict[int, Line] = {}
    for line in lines_of(form, outlook.may_shrink | probable):
        if deadline.passed:
            break
        before[line.row], after[line.row] = line, tightened(line, columns)
    wanted = [
        (after[row], before[row].largest) for row in first[probable[first]].tolist() if row in after
    ]
    shorter = _probed(normal, wanted, near, deadline)
    after |= shorter
    stems = row_stems(form)
    for row, line in after.items():
        if line is not before[row]:
            yield Draft(
                kind="tighten",
                action="Shrink the coefficients of switches in {}",
                suffix="tight",
                noun="row",
                name=form.row_names[row],
                group=stems.names[stems.label[row]],
                sentence=_shrinking(form, before[row], line),
                verified=(
                    "The new limit is proven by a linear program over all rows, computed again "
                    "exactly from its prices"
                    if row in shorter
                    else "The new limit is proven by the bounds of the columns, exactly"
                ),
                change=_written_back(form, line),
            )


def splitting_drafts(form: LinearForm, deadline: Deadline) -> Iterator[Draft]:
    """Split on/off rows."""
    columns, stems, count = columns_of(form), row_stems(form), 0
    for line in lines_of(form, outlook_of(form).may_split):
        part = split(line, columns)
        count += 0 if part is None else len(part.columns)
        if deadline.passed or count > MOST_ROWS:
            return
        if part is None:
            continue
        rows = tuple(_parts(form, part))
        name, switch = form.row_names[line.row], quoted(form.col_names[part.switch])
        instead = "In its place" if part.replaces else "Beside it"
        yield Draft(
            kind="split",
            action="Split {} into rows for single columns",
            suffix="split",
            noun="row",
            name=name,
            group=stems.names[stems.label[line.row]],
            sentence=(
                f"{switch} switches the other columns of row {quoted(name)} on and off. {instead}, "
                f"one row for each ({inequality(rows[0]).removeprefix(': ')}) says more where "
                f"{switch} is fractional"
            ),
            verified=(
                "Each part is what the row and the bounds of its columns allow at either value of "
                "the switch, exactly"
            ),
            inequalities=rows,
            dropped=line.row if part.replaces else -1,
        )


def _rounded_rows(form: LinearForm, found: Rounded) -> Iterator[Draft]:
    stems = row_stems(form)
    for k, i in enumerate(found.rows.tolist()):
        row = form.matrix[[i], :].tocoo()
        limits = float(found.row_lower[k]), float(found.row_upper[k])
        change = _row_change(form, i, np.asarray(row.coords[1], np.int64), row.data, limits)
        before = _between(float(form.row_lower[i]), float(form.row_upper[i]))
        yield Draft(
            kind="round",
            action="Round the sides of {} inwards",
            suffix="rounded",
            noun="row",
            name=change.name,
            group=stems.names[stems.label[i]],
            sentence=(
                f"At whole plans the left side of row {quoted(change.name)} moves in steps of "
                f"{number(found.units[k])}: {before} says no more than {_between(*limits)}"
            ),
            verified=(
                "All columns of the row are whole, and so is every value that it can have after "
                "scaling to coprime whole coefficients"
            ),
            change=change,
        )


def _rounded_bounds(form: LinearForm, found: Rounded) -> Iterator[Draft]:
    stems = column_stems(form)
    for k, j in enumerate(found.columns.tolist()):
        name, limits = form.col_names[j], (float(found.col_lower[k]), float(found.col_upper[k]))
        before = _between(float(form.col_lower[j]), float(form.col_upper[j]))
        yield Draft(
            kind="round",
            action="Round the bounds of {} inwards",
            suffix="rounded",
            noun="column",
            name=name,
            group=stems.names[stems.label[j]],
            sentence=(
                f"Column {quoted(name)} is whole: {before} says no more than {_between(*limits)}"
            ),
            verified="No whole number lies between the old and the new bounds",
            change=BoundChange(j, name, *limits),
        )


def _probed(
    normal: NormalForm, lines: list[tuple[Line, int]], near: Basis | None, deadline: Deadline
) -> dict[int, Line]:
    """Shrink the switches of lines by linear programs; return those lines that change, by row."""
    changed: dict[int, Line] = {}
    if not lines or deadline.passed:
        return changed
    prober, idle = Prober(normal, deadline, near), 0
    for line, switch in lines:
        if deadline.passed or idle == PATIENCE:
            break
        most = prober.most(line, switch)
        shorter = line if most is None else shrunk(line, switch, most)
        idle = idle + 1 if shorter is line else 0
        if shorter is not line:
            changed[line.row] = shorter
    return changed


def _shrinking(form: LinearForm, before: Line, after: Line) -> str:
    """Say which coefficient of a row shrinks most, and why it may."""
    y = max(before.terms, key=lambda j: size(before.terms[j] - after.terms[j]))
    name, state = quoted(form.col_names[y]), loose_state(before, y)
    was, now = (float(line.sign * line.terms[y]) for line in (before, after))
    limit = float(after.sign * (after.side - state * after.terms[y]))
    comes = "never come to more than" if after.sign > 0 else "never fall below"
    return (
        f"In row {quoted(form.row_names[before.row])} the coefficient of {name} can go from "
        f"{number(was)} to {number(now)}: where {name} is {state} the other columns {comes} "
        f"{number(limit)}"
    )


def _written_back(form: LinearForm, line: Line) -> RowChange:
    """A line as a row again; what floats do not hold is rounded so that nothing is lost."""
    columns = np.array([j for j, a in line.terms.items() if a], np.int64)
    exact = [line.terms[j] for j in columns.tolist()]
    own = line.sign * form.matrix[:, columns].tocsr()[[line.row], :].toarray().ravel()
    # A coefficient that did not change stays as it is written, 0.1 say.
    coefficients = np.array(
        [old if float(a) == old else float_below(a) for a, old in zip(exact, own, strict=True)]
    )
    side = line.sign * float_above(line.side)
    limits = (side, np.inf) if line.sign < 0 else (-np.inf, side)
    return _row_change(form, line.row, columns, line.sign * coefficients, limits)


def _parts(form: LinearForm, part: Split) -> Iterator[Inequality]:
    """The rows x <= at_0 + (at_1 - at_0) y of a split; floats are rounded outwards."""
    for j, at_0, at_1, upper in zip(part.columns, part.at_0, part.at_1, part.upper, strict=True):
        rounded = float_above if upper else float_below
        side = rounded(at_0)
        yield Inequality(
            name="",
            columns=np.array([j, part.switch]),
            column_names=(form.col_names[j], form.col_names[part.switch]),
            coefficients=np.array([1.0, -rounded(at_1 - at_0)]),
            lower=-np.inf if upper else side,
            upper=side if upper else np.inf,
        )


def _row_change(
    form: LinearForm,
    row: int,
    columns: Integers,
    coefficients: np.ndarray,
    limits: tuple[float, float],
) -> RowChange:
    names = tuple(form.col_names[j] for j in columns.tolist())
    return RowChange(row, form.row_names[row], columns, names, coefficients, *limits)


def _between(lower: float, upper: float) -> str:
    """Limits in words: '<= 3', '>= 2', '[2, 3]'.

    Examples
    --------
    >>> _between(float("-inf"), 2.5), _between(2.0, 3.0)
    ('<= 2.5', '[2, 3]')
    """
    if lower == -np.inf:
        return f"<= {number(upper)}"
    if upper == np.inf:
        return f">= {number(lower)}"
    return f"[{number(lower)}, {number(upper)}]"
