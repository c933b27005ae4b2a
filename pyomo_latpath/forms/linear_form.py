"""The model as arrays: the one shape in which every other module sees a model."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field, replace
from typing import Any, Literal, cast

import numpy as np
import scipy.sparse as sp
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]
Sense = Literal["min", "max"]


class NumberedNames(Sequence[str]):
    """Names made from a letter and a number, for models that bring none.

    Examples
    --------
    >>> list(NumberedNames("x", 3))
    ['x1', 'x2', 'x3']
    """

    def __init__(self, stem: str, count: int) -> None:
        self.stem, self.size = stem, count

    def __len__(self) -> int:
        return self.size

    def __getitem__(self, index: Any) -> Any:
        if isinstance(index, slice):
            return [self[i] for i in range(*index.indices(self.size))]
        if not -self.size <= index < self.size:
            raise IndexError(index)
        return f"{self.stem}{index % self.size + 1}"


class ComponentNames(Sequence[str]):
    """Names of Pyomo components, looked up only when asked for.

    Asking 160,000 variables for their names takes longer than solving the model,
    so the components are kept and named one by one.

    Attributes
    ----------
    components : list
        The `VarData` or `ConstraintData` behind each column or row.
    model : object
        The model that they belong to; they know it weakly only, and without it have no names.
    """

    def __init__(self, components: list[Any], model: Any = None) -> None:
        self.components, self.model = components, model

    def __len__(self) -> int:
        return len(self.components)

    def __getitem__(self, index: Any) -> Any:
        if isinstance(index, slice):
            return [component.name for component in self.components[index]]
        return self.components[index].name

    def __reduce__(self) -> tuple[Any, ...]:
        # Components drag their whole model along; what travels to another process is the names.
        return (list, (list(self),))


class Memory:
    """Room for what a solve found out about a matrix; `LinearForm.replace` hands it on.

    Copies that travel (pickled, or made by `copy`) begin with an empty one.

    Attributes
    ----------
    content : object or None
        Whoever puts something in holds it against the matrix before believing it.
    """

    def __init__(self) -> None:
        self.content: Any = None

    def __reduce__(self) -> tuple[Any, ...]:
        return (Memory, ())


@dataclass(frozen=True, eq=False)
class LinearForm:
    """Rows L <= A x <= U, columns l <= x <= u, a linear cost, and which columns are integer.

    Attributes
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), float64
        A, with sorted indices, without stored zeros or duplicates.
    row_lower, row_upper : ndarray, shape (m,), float64
        L and U; infinite where a side is missing.
    col_lower, col_upper, cost : ndarray, shape (n,), float64
        l, u and c.
    offset : float
        Constant added to the objective.
    sense : 'min' or 'max'
    integer : ndarray, shape (n,), bool
        Which columns are declared whole.
    row_names, col_names : Sequence[str]
        The user's names; for a compiled Pyomo model `ComponentNames`, which lead back to
        the components.
    semicontinuous : ndarray, shape (n,), bool
        Columns that are 0 or within their bounds; such models are never relaxed.
    memory : Memory
        Shared by all forms made from each other by `replace`.
    """

    matrix: sp.csc_array
    row_lower: Floats
    row_upper: Floats
    col_lower: Floats
    col_upper: Floats
    cost: Floats
    offset: float
    sense: Sense
    integer: Flags
    row_names: Sequence[str]
    col_names: Sequence[str]
    semicontinuous: Flags
    memory: Memory = field(default_factory=Memory, repr=False)

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns."""
        return cast("tuple[int, int]", self.matrix.shape)

    @classmethod
    def from_arrays(
        cls,
        A: Any,
        *,
        row_lower: ArrayLike,
        row_upper: ArrayLike,
        col_lower: ArrayLike,
        col_upper: ArrayLike,
        cost: ArrayLike,
        offset: float = 0.0,
        sense: Sense = "min",
        integer: ArrayLike | None = None,
        row_names: Sequence[str] | None = None,
        col_names: Sequence[str] | None = None,
        semicontinuous: ArrayLike | None = None,
    ) -> LinearForm:
        """Build a form from arrays.

        Parameters
        ----------
        A : array_like or scipy.sparse array, shape (m, n)
        row_lower, row_upper : array_like, shape (m,) or a number for all rows
        col_lower, col_upper, cost : array_like, shape (n,) or a number for all columns
        integer : array_like of bool, shape (n,), optional
            Columns declared whole; all of them when not given.
        row_names, col_names : sequence of str, optional

        Raises
        ------
        ValueError
            For a wrong shape, a coefficient or cost that is not finite, a side or bound that
            is not a number, or a lower side of +inf (upper side of -inf); the row or column
            is named.

        Examples
        --------
        >>> form = LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1,
        ...                               col_lower=0, col_upper=1, cost=[2, 3])
        >>> form.shape
        (1, 2)
        """
        matrix = _canonical(A)
        m, n = matrix.shape
        rows = _names(row_names, m, "r", "row_names")
        cols = _names(col_names, n, "x", "col_names")
        if sense not in ("min", "max"):
            raise ValueError(f"sense is {sense!r}; it must be 'min' or 'max'")
        form = cls(
            matrix=matrix,
            row_lower=_vector(row_lower, m, "row_lower"),
            row_upper=_vector(row_upper, m, "row_upper"),
            col_lower=_vector(col_lower, n, "col_lower"),
            col_upper=_vector(col_upper, n, "col_upper"),
            cost=_vector(cost, n, "cost"),
            offset=float(offset),
            sense=sense,
            integer=_flags(True if integer is None else integer, n, "integer"),
            row_names=rows,
            col_names=cols,
            semicontinuous=_flags(
                False if semicontinuous is None else semicontinuous, n, "semicontinuous"
            ),
        )
        _refuse_bad_entries(form)
        _refuse_bad_data(form, ("cost", "offset", "row_lower", "col_lower"))
        return form

    def replace(self, **changes: Any) -> LinearForm:
        """Return the same structure with other data.

        What a solve found out about the matrix serves the next one, too: a loop over
        `solve(form.replace(cost=...))` recognises nothing twice.

        Parameters
        ----------
        **changes
            Any of `cost`, `offset`, `sense`, `row_lower`, `row_upper`, `col_lower`,
            `col_upper`, `integer`.

        Raises
        ------
        TypeError
            For a name that is not one of these.
        ValueError
            As `from_arrays`.
        """
        allowed = {"cost", "offset", "sense", "integer"}
        allowed |= {"row_lower", "row_upper", "col_lower", "col_upper"}
        unknown = sorted(set(changes) - allowed)
        if unknown:
            raise TypeError(f"replace() cannot change {', '.join(unknown)}; build a new form")
        m, n = self.shape
        for name, value in changes.items():
            if name.startswith(("row_", "col_")) or name == "cost":
                changes[name] = _vector(value, m if name.startswith("row_") else n, name)
        if "integer" in changes:
            changes["integer"] = _flags(changes["integer"], n, "integer")
        if changes.get("sense", "min") not in ("min", "max"):
            raise ValueError(f"sense is {changes['sense']!r}; it must be 'min' or 'max'")
        if "offset" in changes:
            changes["offset"] = float(changes["offset"])
        form = replace(self, **changes)
        _refuse_bad_data(form, changes)
        return form


def _canonical(A: Any) -> sp.csc_array:
    matrix = sp.csc_array(A if sp.issparse(A) else np.atleast_2d(np.asarray(A, dtype=float)))
    if matrix.dtype != np.float64:
        matrix = matrix.astype(np.float64)
    if not matrix.has_canonical_format:
        matrix = matrix.copy()
        matrix.sum_duplicates()
    if matrix.nnz and not matrix.data.all():
        matrix = matrix.copy()
        matrix.eliminate_zeros()
    return matrix


def _vector(values: ArrayLike, size: int, name: str) -> Floats:
    vector = np.asarray(values, dtype=np.float64)
    if vector.ndim == 0:
        return np.full(size, float(vector))
    if vector.shape != (size,):
        raise ValueError(f"{name} has shape {vector.shape}; it needs {size} numbers")
    return vector


def _flags(values: ArrayLike, size: int, name: str) -> Flags:
    flags = np.asarray(values, dtype=np.bool_)
    if flags.ndim == 0:
        return np.full(size, bool(flags))
    if flags.shape != (size,):
        raise ValueError(f"{name} has shape {flags.shape}; it needs {size} flags")
    return flags


def _names(names: Sequence[str] | None, size: int, stem: str, what: str) -> Sequence[str]:
    if names is None:
        return NumberedNames(stem, size)
    if len(names) != size:
        raise ValueError(f"{what} has {len(names)} names; it needs {size}")
    return names


def _refuse_bad_entries(form: LinearForm) -> None:
    """Name the first coefficient that no solver could make sense of."""
    bad = ~np.isfinite(form.matrix.data)
    if bad.any():
        k = int(np.argmax(bad))
        j = int(np.searchsorted(form.matrix.indptr, k, side="right")) - 1
        i = int(form.matrix.indices[k])
        raise ValueError(
            f"row {form.row_names[i]!r} has the coefficient {form.matrix.data[k]} at column "
            f"{form.col_names[j]!r}; coefficients must be finite"
        )


def _refuse_bad_data(form: LinearForm, changed: Iterable[str]) -> None:
    """Name the first number among costs, sides and bounds that makes no sense."""
    if "offset" in changed and not np.isfinite(form.offset):
        raise ValueError(f"the objective's constant is {form.offset}; it must be finite")
    bad = ~np.isfinite(form.cost)
    if "cost" in changed and bad.any():
        j = int(np.argmax(bad))
        raise ValueError(
            f"column {form.col_names[j]!r} has the cost {form.cost[j]}; costs must be finite"
        )
    for kind, names, lower, upper in (
        ("row", form.row_names, form.row_lower, form.row_upper),
        ("column", form.col_names, form.col_lower, form.col_upper),
    ):
        if not {f"{kind[:3]}_lower", f"{kind[:3]}_upper"} & set(changed):
            continue
        bad = np.isnan(lower) | np.isnan(upper) | (lower == np.inf) | (upper == -np.inf)
        if bad.any():
            i = int(np.argmax(bad))
            raise ValueError(
                f"{kind} {names[i]!r} has the limits [{lower[i]}, {upper[i]}]; a lower limit must "
                "be a number below +inf and an upper one a number above -inf"
            )
