"""Small random models whose rows come in named groups."""

from __future__ import annotations

import numpy as np

from pyomo_latpath.deadline import Deadline
from pyomo_latpath.explain.remains import Remains
from pyomo_latpath.forms.linear_form import LinearForm

NAMES = ("cave", "town", "van", "budget")


def grouped_form(rng: np.random.Generator) -> LinearForm:
    """Draw a feasible form with at most 4 groups of 1 to 3 rows, and 3 to 6 binary columns.

    Rows hold two or three entries +-1; one group may hold entries of 2 and 3.
    """
    columns = int(rng.integers(3, 7))
    rows, names = [], []
    for k in range(int(rng.integers(1, 5))):
        for i in range(int(rng.integers(1, 4))):
            row = np.zeros(columns)
            place = rng.choice(columns, int(rng.integers(2, 4)), replace=False)
            row[place] = rng.choice([-1, 1], place.size, p=[0.2, 0.8])
            if k == 3 and rng.random() < 0.7:
                row[place[0]] = rng.integers(2, 4)
            rows.append(row)
            names.append(f"{NAMES[k]}[{i}]")
    matrix = np.array(rows)
    plan = rng.integers(0, 2, columns)
    return LinearForm.from_arrays(
        matrix,
        row_lower=np.where(rng.random(len(rows)) < 0.2, matrix @ plan, -np.inf),
        row_upper=matrix @ plan + rng.integers(0, 2, len(rows)) * (rng.random(len(rows)) < 0.5),
        col_lower=0,
        col_upper=1,
        cost=rng.integers(-9, 4, columns),
        sense="min" if rng.random() < 0.5 else "max",
        row_names=names,
    )


def certified_without(form: LinearForm, rows) -> bool:
    """Whether what is left without some rows is certified whole; nothing is remembered."""
    kept = np.ones(form.shape[0], np.bool_)
    kept[list(rows)] = False
    return Remains(form).certified(kept, Deadline(None)) is not None
