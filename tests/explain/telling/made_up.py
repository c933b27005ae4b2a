"""Explanations made up by hand, so that their forms are tested without any search."""

from __future__ import annotations

import math
from dataclasses import replace
from fractions import Fraction
from typing import Any

import numpy as np

from pyomo_latpath.explain.explanation import (
    BlockSummary,
    ComponentShare,
    Culprit,
    Explanation,
    Fractional,
    Gap,
    Group,
    NamedViolator,
    NoOptimum,
    Reason,
    Sketch,
    Whole,
)
from pyomo_latpath.explain.remedies.remedy import Inequality, Remedy
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.integrality.finding import BlockFinding, Finding, Verdict

NONE = np.empty(0, np.int64)
FORM = LinearForm.from_arrays([[1.0]], row_lower=0, row_upper=1, col_lower=0, col_upper=1, cost=1)

#: Names that a model may well have, or that somebody may try.
HOSTILE = (
    "<script>document.title = 'taken'</script>",
    "\"quoted\" & 'quoted' <b>",
    "</style><h1>x",
    "جبن[كهف،سوق]",
    "turned\u202egnp.exe",
    "two\nlines\tand a bell\x07",
    "half a pair \ud800",
    "long[" + "cave," * 120 + "]",
    "🧀" * 30,
    "%s{0}${x}`",
)


def finding(*verdicts: Verdict) -> Finding:
    """One block of each verdict."""
    blocks = tuple(
        BlockFinding(NONE, NONE, verdict, None, None, None, 32 * (verdict == "sampled"), "why")
        for verdict in verdicts
    )
    return Finding(blocks, 0, 0)


def group(name: str, size: int = 5, **changes: Any) -> Group:
    told = Group(
        name, np.arange(size), size, 3 * size, beyond=0, broken_sides=0, continuous=0, tight=2,
        certified_alone=None, to_blame=False,
    )  # fmt: skip
    return replace(told, **changes)


def odd_cycle(k: int, names: tuple[str, ...] = ()) -> NamedViolator:
    """k caves of which any two neighbours exclude each other, in the order of the cycle."""
    entries = np.zeros((k, k), np.int64)
    for i in range(k):
        entries[i, i - 1] = entries[i, i] = 1
    rows = tuple(f"exclude[{i},{i + 1}]" for i in range(k))
    columns = tuple(f"open[cave {i}]" for i in range(k))
    return NamedViolator(
        np.arange(k), np.arange(k), (names + rows)[:k], (names + columns)[:k], entries,
        determinant=2, cycle=True, minimal=True, groups=("exclude",), block=0,
    )  # fmt: skip


def remedy(**changes: Any) -> Remedy:
    told = Remedy(
        kind="cut", name="odd_cut", title="add an inequality from the odd cycle",
        sentence="Half the sum of the rows, rounded down, holds for every whole plan.",
        names=("exclude[0,1]", "open[cave 0]"), verified="each row was recomputed exactly.",
        bound_before=9612.53, bound_after=9530.0, fractional_before=12, fractional_after=4,
        bound_together=9530.0, fractional_together=4,
        inequalities=(
            Inequality("odd_cut[0]", NONE, ("open[cave 0]", "open[cave 1]"),
                       np.array([1.0, -2.0]), -math.inf, 1.0),
        ),
    )  # fmt: skip
    return replace(told, **changes)


def fractional(**changes: Any) -> Explanation:
    """A selection under a budget, with two blocks."""
    counts = np.zeros((8, 10), np.int64)
    counts[:6, :7] = np.eye(6, 7, dtype=np.int64) * 3
    counts[0, :7] = 4
    counts[6:, 7:] = 2
    told = Explanation(
        finding=finding(Verdict.REFUTED, Verdict.PROVEN), rows=73, columns=720, integers=720,
        nonzeros=2160,
        fractional=Fractional(
            12, 720, "ripens[3,4]", Fraction(1, 2),
            (ComponentShare("ripens", 700, 12, "ripens[3,4]", Fraction(1, 2), 30),
             ComponentShare("rests", 20, 0, None, None, 0)),
            32, 30,
        ),
        gap=Gap("max", 9612.53, 9612.53, 9465.0, 9465.0, "optimal", 0.4),
        witness=None,
        groups=(group("one_cave", 60), group("shelves", 12, certified_alone=True),
                group("budget", 1, beyond=720, broken_sides=1, to_blame=True)),
        grouped_by="component",
        culprits=(
            Culprit(("budget",), True, ("budget",), NONE, True, ("incidence",),
                    "What is left is an incidence structure.", 12345.0, 2880.0),
        ),
        violators=(odd_cycle(5),),
        reasons=(Reason("coefficient", "budget", 720, ("budget",),
                        "720 coefficients of budget are not 0 or +-1."),),
        whole=None, no_optimum=None,
        remedies=(remedy(), remedy(title="round sides inwards", bound_together=9480.0)),
        blocks=(
            BlockSummary(60, 700, 2100, Verdict.REFUTED, None, "A vertex is fractional.",
                         (0, 60), (0, 700)),
            BlockSummary(13, 20, 60, Verdict.PROVEN, "interval", "Consecutive ones.",
                         (60, 73), (700, 720)),
        ),
        sketch=Sketch(73, 720, counts, np.array([0, 10, 20, 30, 40, 50, 60, 66, 73]),
                      np.array([0, 100, 200, 300, 400, 500, 600, 700, 706, 713, 720])),
        complete=True, cut_off=(), interrupted=False,
        seconds={"assess": 0.12, "groups": 0.5}, form=FORM,
    )  # fmt: skip
    return replace(told, **changes)


def whole() -> Explanation:
    return fractional(
        finding=finding(Verdict.PROVEN), gap=Gap("min", 14.0, 14.0, 14.0, 14.0, "optimal", 0.1),
        fractional=Fractional(0, 720, None, None, (), 0, 0), culprits=(), violators=(), reasons=(),
        remedies=(), groups=(group("one_cave"), group("shelves")),
        whole=Whole(("All 73 rows form an incidence structure.",),
                    ("A row that holds a column of both sides.",), 0.02, 1.7, False),
        blocks=(BlockSummary(73, 720, 2160, Verdict.PROVEN, "incidence", "At most two entries.",
                             (0, 73), (0, 720)),),
    )  # fmt: skip


def infeasible() -> Explanation:
    return fractional(
        finding=finding(Verdict.PROVEN), gap=None, fractional=None, culprits=(), violators=(),
        reasons=(), remedies=(),
        no_optimum=NoOptimum("infeasible", "supply and demand ask for 3 more than can be had",
                             ("supply[north]", "demand[market]", "bounds of ship[1,2]"), True,
                             ("supply", "demand"), False),
    )  # fmt: skip


def unfinished() -> Explanation:
    """What is left when the time runs out at once."""
    return fractional(
        finding=finding(Verdict.UNDECIDED), gap=None, fractional=None, culprits=(), violators=(),
        reasons=(), remedies=(), groups=(), blocks=(), complete=False, interrupted=True,
        cut_off=("The relaxation was not solved: the time ran out.",), seconds={},
        sketch=Sketch(0, 0, np.zeros((0, 0), np.int64), np.zeros(1, np.int64),
                      np.zeros(1, np.int64)),
    )  # fmt: skip


def sampled() -> Explanation:
    return fractional(
        finding=finding(Verdict.SAMPLED), culprits=(), violators=(), reasons=(), remedies=(),
        fractional=Fractional(0, 720, None, None, (), 32, 0),
        gap=Gap("max", 9465.0, 9465.0, 9465.0, 9465.0, "optimal", 0.4),
    )  # fmt: skip


def hostile() -> Explanation:
    """Names of every bad kind, at every place where a name can stand."""
    k = len(HOSTILE)
    grid = replace(odd_cycle(k, HOSTILE), cycle=False, minimal=False)
    return fractional(
        groups=tuple(group(name, to_blame=True) for name in HOSTILE),
        culprits=(Culprit(HOSTILE, False, HOSTILE, NONE, False, ("network",),
                          f"Without {HOSTILE[0]} it is whole.", math.nan, math.nan),),
        violators=(odd_cycle(k, HOSTILE), grid),
        reasons=tuple(Reason("side", name, 1, (name,), f"{name} is not whole.")
                      for name in HOSTILE),
        remedies=tuple(remedy(title=name, sentence=name, names=(name,)) for name in HOSTILE),
        fractional=Fractional(
            k, k, HOSTILE[0], Fraction(1, 3),
            tuple(ComponentShare(name, 1, 1, name, Fraction(1, 2), 0) for name in HOSTILE), 0, 0,
        ),
    )  # fmt: skip


def very_large(count: int = 20_000) -> Explanation:
    """Thousands of groups, components, blocks and names."""
    names = tuple(f"demand[town {i}]" for i in range(count))
    verdicts = list(Verdict)
    edges = np.linspace(0, count, 41).astype(np.int64)
    return fractional(
        rows=count, columns=count,
        groups=tuple(group(name, 1) for name in names),
        culprits=(Culprit(names[:900], False, names, NONE, False, ("network",), "", 1.0, 2.0),),
        violators=(odd_cycle(17), odd_cycle(901)),
        fractional=Fractional(
            count, count, names[0], Fraction(1, 2),
            tuple(ComponentShare(name, 1, 1, name, Fraction(1, 2), 0) for name in names), 0, 0,
        ),
        remedies=tuple(remedy(names=names) for _ in range(40)),
        blocks=tuple(BlockSummary(1, 1, 1, verdicts[i % 4], None, "small", (i, i + 1), (i, i + 1))
                     for i in range(count)),
        sketch=Sketch(count, count, np.eye(40, dtype=np.int64) * 50, edges, edges),
    )  # fmt: skip


#: One of each kind; `very_large` stands apart.
MAKERS = (fractional, whole, infeasible, unfinished, sampled, hostile)
