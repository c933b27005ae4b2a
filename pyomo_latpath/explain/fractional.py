"""How much of the relaxation's optimum is fractional, and how often sampled vertices are."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from ..deadline import Deadline
from ..forms.linear_form import Flags, Floats
from ..forms.numbers import nearby_fraction
from ..highs import LpResult
from .relaxation import Relaxation, fractional
from .stems import Stems

#: How close to its computed value a fractional column is told.
READING = 1e-9


@dataclass(frozen=True)
class ComponentShare:
    """How often one variable component of the model is fractional.

    Attributes
    ----------
    name : str
        Of the component ("ship" for "ship[cave,town]").
    integers : int
        Its columns that are declared integer, fixed ones left out.
    fractional : int
        Those of them that are fractional at the relaxation's optimum.
    worst_name : str or None
        The one furthest from a whole number there.
    worst_value : Fraction or None
    sampled : int
        Of the sampled vertices, how many have a fractional column of this component.
    """

    name: str
    integers: int
    fractional: int
    worst_name: str | None
    worst_value: Fraction | None
    sampled: int


@dataclass(frozen=True)
class Fractional:
    """Which integer columns are fractional at the optimum of the normalised relaxation.

    Attributes
    ----------
    count, integers : int
        Fractional ones, and all that are not fixed.
    worst_name : str or None
        The column furthest from a whole number.
    worst_value : Fraction or None
        Its value: the simplest fraction within 1e-9 of the computed one.
    components : tuple of ComponentShare
        Most fractional columns first.
    samples : int
        K, the vertices on which `ComponentShare.sampled` rests: a sample, no proof.
    samples_fractional : int
        Those with any fractional column.
    declared : int or None
        Fractional columns at the optimum of the relaxation as declared, before sides and bounds
        were rounded inwards; None where it has none, or not in time.
    """

    count: int
    integers: int
    worst_name: str | None
    worst_value: Fraction | None
    components: tuple[ComponentShare, ...]
    samples: int
    samples_fractional: int
    declared: int | None = None


def measure(
    relaxation: Relaxation,
    optimum: LpResult,
    components: Stems,
    *,
    samples: int,
    seed: int,
    deadline: Deadline,
) -> Fractional:
    """Count fractional columns at the optimum, and at further vertices.

    Parameters
    ----------
    relaxation : Relaxation
        Its objective is put back at the end.
    optimum : LpResult
    components : Stems
        Of the form's columns.
    samples : int
        Vertices at most, the optimum included.
    seed : int
    deadline : Deadline
        For the sampling; the optimum is counted in any case.

    Returns
    -------
    Fractional
    """
    normal = relaxation.normal
    label = components.label[normal.columns]
    here = fractional(normal, optimum.x)
    size = len(components.names)
    often, count, any_fractional = np.zeros(size, np.int64), 0, 0
    for flags in _vertices(relaxation, here, samples, seed, deadline):
        often[np.unique(label[flags])] += 1
        count, any_fractional = count + 1, any_fractional + int(flags.any())
    integers = np.bincount(label[normal.integer], minlength=size)
    hit = np.bincount(label[here], minlength=size)
    shares = []
    for k in np.lexsort((-integers, -often, -hit)).tolist():
        if integers[k]:
            name, value = _worst(relaxation, optimum.x, here & (label == k))
            told = components.names[k], int(integers[k]), int(hit[k]), name, value, int(often[k])
            shares.append(ComponentShare(*told))
    name, value = _worst(relaxation, optimum.x, here)
    return Fractional(
        count=int(here.sum()),
        integers=int(normal.integer.sum()),
        worst_name=name,
        worst_value=value,
        components=tuple(shares),
        samples=count,
        samples_fractional=any_fractional,
    )


def _vertices(
    relaxation: Relaxation, first: Flags, samples: int, seed: int, deadline: Deadline
) -> Iterator[Flags]:
    """Fractional columns of one vertex after the other, Gaussian and scaled costs in turn."""
    yield first
    cost, rng = relaxation.normal.cost, np.random.default_rng(seed)
    try:
        for k in range(1, samples):
            scaled = cost * 10.0 ** rng.uniform(-1.0, 1.0, cost.size)
            relaxation.program.set_cost(scaled if k % 2 else rng.standard_normal(cost.size))
            result = None if deadline.passed else relaxation.program.solve(deadline=deadline)
            if result is None or result.status == "time_limit":
                break
            if result.status == "optimal":
                yield fractional(relaxation.normal, result.x)
    finally:
        relaxation.program.set_cost(cost)


def _worst(relaxation: Relaxation, x: Floats, here: Flags) -> tuple[str | None, Fraction | None]:
    """The column furthest from a whole number, and its value in the form's units."""
    normal = relaxation.normal
    if not here.any():
        return None, None
    j = int(np.argmax(np.where(here, np.abs(x - np.rint(x)), -1.0)))
    value = float(normal.x_original(x)[j])
    return normal.form.col_names[int(normal.columns[j])], nearby_fraction(value, READING)
