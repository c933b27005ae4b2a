"""What certificates of sums, pivots and R10 mean: on dense tables, by the formulas as published."""

from __future__ import annotations

import copy

import numpy as np
from brute_force import determinant
from known_matrices import R10
from part_meanings import network_holds


def part_holds(matrix, data) -> bool:
    """Whether a part, as data, is true of a matrix."""
    return HOLDS[data["kind"]](matrix, data)


def sum_holds(matrix, data) -> bool:
    """Take the matrix apart step by step; `homes` tells where each line is, -1 for nowhere."""
    if np.abs(matrix).max() > 1:
        return False
    table, homes = matrix, [np.zeros(size, np.int64) for size in matrix.shape]
    for step in data["steps"]:
        found = dropped(table, homes, step) if "reason" in step else divided(table, homes, step)
        if found is None:
            return False
        table, homes = found
    count = 1 + sum("reason" not in step for step in data["steps"])
    if len(data["parts"]) != count:
        return False
    own = [[np.flatnonzero(home == k) for home in homes] for k in range(count)]
    return all(
        part_holds(table[np.ix_(*lines)], part)
        for lines, part in zip(own, data["parts"], strict=True)
    )


def dropped(table, homes, step):
    """Table and homes after a reduction; None if it is none."""
    axis = 0 if "row" in step else 1
    line = step["row" if axis == 0 else "column"]
    if not 0 <= line < len(homes[axis]) or homes[axis][line] < 0:
        return None
    home = homes[axis][line]
    lines = np.where(homes[1 - axis] == home, table if axis == 0 else table.T, 0)
    own = lines[line]
    if step["reason"] == "copy":
        of, sign = step["of"], step["sign"]
        there = 0 <= of < len(lines) and homes[axis][of] == home and of != line
        good = there and abs(sign) == 1 and np.array_equal(own, sign * lines[of])
    else:
        good = np.count_nonzero(own) == (step["reason"] == "unit")
    homes = copy.deepcopy(homes)
    homes[axis][line] = -1
    return (table, homes) if good else None


def divided(table, homes, step):
    """Table and homes after a split; None if there is no such sum."""
    named = [step["rows"], step["columns"]]
    for lines, home in zip(named, homes, strict=True):
        if len(set(lines)) < len(lines) or not all(0 <= k < len(home) for k in lines):
            return None
    of = {int(home[k]) for lines, home in zip(named, homes, strict=True) for k in lines}
    if len(of) != 1 or -1 in of or len(step["entries"]) > 2:
        return None
    old, new = of.pop(), max(home.max() for home in homes) + 1
    first = [np.setdiff1d(np.flatnonzero(home == old), lines) for home, lines in
             zip(homes, named, strict=True)]  # fmt: skip
    links = {}
    for above, below in ((first[0], named[1]), (named[0], first[1])):
        places = [(i, j) for i, j in step["entries"] if i in above and j in below]
        product = factored(table, list(above), list(below), places)
        if product is None:
            return None
        links |= product
    if len(links) != len(step["entries"]):
        return None
    homes = [home.copy() for home in homes]
    for home, lines in zip(homes, named, strict=True):
        home[lines] = new
    vectors = {old: [], new: []}
    for i, j in step["entries"]:
        column, row = links[i, j]
        above, below = homes[0][i], homes[1][j]
        table = np.pad(table, (0, 1))
        table[: column.size, -1], table[-1, : row.size] = column, row
        homes = [np.append(homes[0], below), np.append(homes[1], above)]
        vectors[above].append(("column", table.shape[1] - 1))
        vectors[below].append(("row", table.shape[0] - 1))
    if len(step["entries"]) == 2:
        if abs(step["sign"]) != 1:
            return None
        for home, (z1, z2) in vectors.items():
            unit = np.eye(len(table), dtype=np.int64)
            z = [table[:, k] if axis == "column" else unit[k] for axis, k in (z1, z2)]
            inside = homes[0] == home
            table = np.hstack([table, np.where(inside, z[0] + step["sign"] * z[1], 0)[:, None]])
            homes[1] = np.append(homes[1], home)
    return table, homes


def factored(table, above, below, places):
    """Columns and rows of a corner through the places, as lines of the table, by Cramer's rule."""
    corner = table[np.ix_(above, below)]
    if not places:
        return None if corner.any() else {}
    i, j = [above.index(i) for i, _ in places], [below.index(j) for _, j in places]
    square = corner[np.ix_(i, j)]
    det = int(determinant(square.tolist()))
    if abs(det) != 1:
        return None
    rows = []
    for k in range(len(places)):
        tables = [square.copy() for _ in below]
        for n, own in enumerate(tables):
            own[:, k] = corner[i, n]
        rows.append([det * int(determinant(own.tolist())) for own in tables])
    rows = np.array(rows)
    if np.abs(rows).max() > 1 or not np.array_equal(corner[:, j] @ rows, corner):
        return None
    links = {}
    for k, place in enumerate(places):
        column, row = np.zeros(table.shape[0], np.int64), np.zeros(table.shape[1], np.int64)
        column[above], row[below] = corner[:, j[k]], rows[k]
        links[tuple(place)] = column, row
    return links


def pivot_holds(matrix, data) -> bool:
    """Solve the row for the column, in the system [I M]."""
    i, j = data["row"], data["column"]
    if not (0 <= i < matrix.shape[0] and 0 <= j < matrix.shape[1] and abs(matrix[i, j]) == 1):
        return False
    system = np.hstack([np.eye(len(matrix), dtype=np.int64), matrix])
    j += len(matrix)
    system[i] *= system[i, j]
    for k in range(len(system)):
        if k != i:
            system[k] -= system[k, j] * system[i]
    system[:, [i, j]] = system[:, [j, i]]
    return part_holds(system[:, len(matrix) :], data["rest"])


def r10_holds(matrix, data) -> bool:
    """Multiply with signed permutations."""
    tables = []
    for lines, signs in (("row_order", "row_signs"), ("column_order", "column_signs")):
        if sorted(data[lines]) != list(range(5)) or not set(data[signs]) <= {1, -1}:
            return False
        tables.append(np.eye(5, dtype=np.int64)[data[lines]] * np.array(data[signs])[:, None])
    product = tables[0] @ matrix @ tables[1].T
    return any(np.array_equal(product, known) for known in R10)


HOLDS = {
    "sum": sum_holds,
    "pivot": pivot_holds,
    "r10": r10_holds,
    "network": network_holds,
    "conetwork": network_holds,
}
