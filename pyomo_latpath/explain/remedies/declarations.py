"""Integer declarations that the others imply: dropped, with the rounding that they allowed."""

from __future__ import annotations

from ...deadline import Deadline
from ...forms.normalise import NormalForm
from ...integrality.implied import implied_columns
from ...pages.markup import counted
from ..naming import listed
from .drafts import Namer, numbered
from .remedy import BoundChange, Inequality, Remedy, RowChange
from .row_drafts import rounding_drafts


def declaration_remedy(normal: NormalForm, namer: Namer, deadline: Deadline) -> Remedy | None:
    """Drop the integer declarations that the others imply.

    What normalisation rounds because these columns are whole is rounded for good: x + y <= 3/2
    has whole vertices only as x + y <= 1.

    Parameters
    ----------
    normal : NormalForm
    namer : Namer
    deadline : Deadline

    Returns
    -------
    Remedy or None
        None where none is implied.
    """
    form = normal.form
    columns = normal.columns[implied_columns(normal, deadline)]
    if not columns.size:
        return None
    touched = set(form.matrix[:, columns].indices.tolist())
    dropped = set(columns.tolist())
    changes = [draft.change for draft in rounding_drafts(normal)]
    # Further rows, not changed ones: other remedies may have put better rows in their places.
    rows = [
        Inequality("", c.columns, c.column_names, c.coefficients, c.lower, c.upper)
        for c in changes
        if isinstance(c, RowChange) and c.row in touched
    ]
    bounds = [c for c in changes if isinstance(c, BoundChange) and c.column in dropped]
    names = tuple(form.col_names[j] for j in columns.tolist())
    left = int(form.integer.sum()) - columns.size
    enough = f"{left:,} {'is' if left == 1 else 'are'} enough" if left else "none is needed"
    name = namer.free("", "rounded")
    return Remedy(
        kind="drop",
        name=name,
        title=f"Drop {counted(columns.size, 'integer declaration')}: {enough}",
        sentence=(
            f"Whatever whole numbers the other integer columns are, what is left has whole "
            f"vertices in {listed(names, 4)}. So the best value stays the same, and a vertex with "
            "that value is whole."
        ),
        names=names,
        verified=(
            "What is left when the other integer columns are fixed has a certificate of total "
            "unimodularity, and whole sides and bounds."
        ),
        inequalities=numbered(name, rows),
        bound_changes=tuple(bounds),
        dropped_declarations=columns,
        dropped_declaration_names=names,
    )
