"""A slow, exact solver for tiny models: simplex with fractions inside branch and bound.

It settles what floating point cannot. Nothing in it is shared with the package but the reading
of decimal numbers (0.1 is 1/10).
"""

from __future__ import annotations

import math
from fractions import Fraction

from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.forms.numbers import simplest_fraction

#: Branch and bound gives up after so many linear programs.
MOST_PROGRAMS = 500


def solve_exactly(form: LinearForm) -> tuple[str, Fraction | None]:
    """Return ('optimal', objective), ('infeasible', None) or ('unbounded', None).

    A model with rational data is unbounded exactly if its relaxation is and a plan exists
    (Meyer 1974, On the existence of optimal solutions to integer and mixed-integer programming
    problems).
    """
    sign = 1 if form.sense == "min" else -1
    cost = [sign * _read(c) for c in form.cost]
    bounds = [
        (_read(low), _read(high)) for low, high in zip(form.col_lower, form.col_upper, strict=True)
    ]
    dense = form.matrix.toarray()
    rows = [
        ([_read(a) for a in dense[i]], _read(form.row_lower[i]), _read(form.row_upper[i]))
        for i in range(form.shape[0])
    ]
    whole = [j for j in range(form.shape[1]) if form.integer[j]]
    status, value = _branch(rows, bounds, cost, whole)
    if status == "unbounded":
        status, value = _branch(rows, bounds, [Fraction(0)] * len(cost), whole)
        return ("infeasible" if status == "infeasible" else "unbounded"), None
    if value is None:
        return status, None
    return status, sign * value + _read(form.offset)


def _read(value: float) -> Fraction | None:
    return simplest_fraction(float(value)) if math.isfinite(value) else None


def _branch(rows, bounds, cost, whole):
    best, waiting, programs = None, [bounds], 0
    while waiting:
        programs += 1
        assert programs <= MOST_PROGRAMS, "too many branches; the test's model is too large"
        box = waiting.pop()
        status, value, x = simplex(rows, box, cost)
        if status == "unbounded":
            return status, None
        if status == "infeasible" or (best is not None and value >= best):
            continue
        split = next((j for j in whole if x[j].denominator > 1), None)
        if split is None:
            best = value
            continue
        low, high = box[split]
        down, up = list(box), list(box)
        down[split] = (low, Fraction(math.floor(x[split])))
        up[split] = (Fraction(math.ceil(x[split])), high)
        waiting += [down, up]
    return ("infeasible", None) if best is None else ("optimal", best)


def simplex(rows, bounds, cost):
    """Minimise exactly; two phases, Bland's rule (Bland 1977). Returns status, value, x."""
    if any(None not in pair and pair[0] > pair[1] for pair in bounds):
        return "infeasible", None, None
    # Every column becomes base + sum of nonnegative parts with coefficients +-1.
    parts, base, more = [], [], []
    for j, (low, high) in enumerate(bounds):
        base.append(low if low is not None else high if high is not None else Fraction(0))
        parts.append((j, 1 if low is not None or high is None else -1))
        if low is None and high is None:
            parts.append((j, -1))
        if low is not None and high is not None:
            unit = [Fraction(int(k == j)) for k in range(len(bounds))]
            more.append((unit, None, high))
    equations = []
    for entries, low, high in [*rows, *more]:
        shift = sum((a * b for a, b in zip(entries, base, strict=True)), Fraction(0))
        left = [sign * entries[j] for j, sign in parts]
        if low is not None and low == high:
            equations.append((left, 0, low - shift))
            continue
        if high is not None:
            equations.append((left, 1, high - shift))
        if low is not None:
            equations.append((left, -1, low - shift))
    status, value, y = _standard(equations, [sign * cost[j] for j, sign in parts])
    if status != "optimal":
        return status, None, None
    x = list(base)
    for (j, sign), amount in zip(parts, y, strict=True):
        x[j] += sign * amount
    constant = sum((c * b for c, b in zip(cost, base, strict=True)), Fraction(0))
    return status, value + constant, x


def _standard(equations, cost):
    """Minimise cost.y over left.y + slack*s = right, y, s >= 0, by a dense tableau."""
    m, n = len(equations), len(cost)
    slacks = [i for i, (_, slack, _) in enumerate(equations) if slack]
    width = n + len(slacks) + m
    table = []
    for i, (left, slack, right) in enumerate(equations):
        line = [*left, *(Fraction(slack if k == i else 0) for k in slacks)]
        if right < 0:
            line, right = [-a for a in line], -right
        table.append([*line, *(Fraction(int(k == i)) for k in range(m)), right])
    basis = list(range(width - m, width))
    first = [Fraction(0)] * (width - m) + [Fraction(1)] * m
    if _pivot_all(table, basis, first, width) is None or any(
        table[i][-1] for i in range(m) if basis[i] >= width - m
    ):
        return "infeasible", None, None
    for i in range(m):
        # An artificial column left in the basis at 0 is pivoted out where its row allows it.
        if basis[i] >= width - m:
            j = next((j for j in range(width - m) if table[i][j]), None)
            if j is not None:
                _pivot(table, basis, i, j)
    second = [*cost, *[Fraction(0)] * (width - n)]
    value = _pivot_all(table, basis, second, width - m)
    if value is None:
        return "unbounded", None, None
    y = [Fraction(0)] * width
    for i in range(m):
        y[basis[i]] = table[i][-1]
    return "optimal", value, y[:n]


def _pivot_all(table, basis, cost, width):
    """Pivot until optimal and return the value; None where unbounded."""
    while True:
        price = [cost[j] for j in basis]
        enter = next(
            (
                j
                for j in range(width)
                if j not in basis
                and cost[j] < sum(p * line[j] for p, line in zip(price, table, strict=True))
            ),
            None,
        )
        if enter is None:
            return sum((p * line[-1] for p, line in zip(price, table, strict=True)), Fraction(0))
        ratios = [
            (line[-1] / line[enter], basis[i], i) for i, line in enumerate(table) if line[enter] > 0
        ]
        if not ratios:
            return None
        _pivot(table, basis, min(ratios)[2], enter)


def _pivot(table, basis, row, column):
    pivot = table[row][column]
    table[row] = [a / pivot for a in table[row]]
    for i, line in enumerate(table):
        factor = line[column]
        if i != row and factor:
            table[i] = [a - factor * b for a, b in zip(line, table[row], strict=True)]
    basis[row] = column
