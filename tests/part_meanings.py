"""What networks, reductions and systems in a certificate mean, spelled out step by step."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
from brute_force import network_matrix


def network_holds(matrix, data) -> bool:
    """Rebuild the matrix by walking the tree."""
    table = matrix if data["kind"] == "network" else matrix.T
    if (len(data["tree"]), len(data["arcs"])) != table.shape:
        return False
    rebuilt = network_matrix(data["tree"], data["arcs"])
    return rebuilt is not None and np.array_equal(rebuilt, table)


def reduced_holds(matrix, data) -> bool:
    """Take the steps one by one."""
    table, left = matrix.copy(), {"row": set(range(len(matrix)))}
    left["column"] = set(range(matrix.shape[1]))
    for step in data["steps"]:
        axis = "row" if "row" in step else "column"
        lines = table if axis == "row" else table.T
        line = step[axis]
        if line not in left[axis]:
            return False
        size = np.abs(lines[line]).sum()
        if step["reason"] == "zero" and size != 0:
            return False
        if step["reason"] == "unit" and not (size == 1 == np.count_nonzero(lines[line])):
            return False
        if step["reason"] == "copy":
            of = step["of"]
            if of == line or of not in left[axis] or abs(step["sign"]) != 1:
                return False
            if not np.array_equal(lines[line], step["sign"] * lines[of]):
                return False
        lines[line] = 0
        left[axis].discard(line)
    rest = table[np.ix_(sorted(left["row"]), sorted(left["column"]))]
    return network_holds(rest, data["rest"])


def unimodular_holds(matrix, data) -> bool:
    """Do the operations in fractions, each on a whole row."""
    m, wrong = len(matrix), False
    table = matrix.astype(object)
    for row, source, factor in data["operations"]:
        if not (0 <= row < m and 0 <= source < m):
            return False
        if row != source:
            table[row] = table[row] + factor * table[source]
        elif factor < 1:
            return False
        else:
            table[row] = table[row] * Fraction(1, factor)
            wrong |= any(x.denominator != 1 for x in table[row])
    if wrong or any(abs(x) > 1 for x in table.flat):
        return False
    return REST_HOLDS[data["rest"]["kind"]](table.astype(np.int64), data["rest"])


REST_HOLDS = {"network": network_holds, "conetwork": network_holds, "reduced": reduced_holds}
HOLDS = {**REST_HOLDS, "unimodular": unimodular_holds}
