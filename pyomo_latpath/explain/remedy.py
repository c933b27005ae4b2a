"""What can be done about a fractional relaxation: one change of the model, checked, as data."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from .plain import plain

Indices = NDArray[np.int64]
Floats = NDArray[np.float64]

#: What a remedy does: round sides, bounds or coefficients inwards; put several rows in place of
#: one; add an inequality; drop integer declarations.
Kind = Literal["round", "tighten", "split", "cut", "drop"]


@dataclass(frozen=True, eq=False)
class Inequality:
    """lower <= sum of coefficient times column <= upper, to be added to a model.

    Attributes
    ----------
    name : str
        For the new row.
    columns : ndarray, shape (k,), int64
        Indices into the form.
    column_names : tuple of str, length k
    coefficients : ndarray, shape (k,), float64
    lower, upper : float
        Infinite where a side is missing.
    """

    name: str
    columns: Indices = field(repr=False)
    column_names: tuple[str, ...]
    coefficients: Floats
    lower: float
    upper: float


@dataclass(frozen=True, eq=False)
class RowChange:
    """A row with other coefficients or sides.

    Attributes
    ----------
    row : int
        Index into the form.
    name : str
    columns : ndarray, shape (k,), int64
        Columns whose coefficients change; often none.
    column_names : tuple of str, length k
    coefficients : ndarray, shape (k,), float64
        The new ones; 0 takes the column out.
    lower, upper : float
        The new sides.
    """

    row: int = field(repr=False)
    name: str
    columns: Indices = field(repr=False)
    column_names: tuple[str, ...]
    coefficients: Floats
    lower: float
    upper: float


@dataclass(frozen=True)
class BoundChange:
    """A column with other bounds.

    Attributes
    ----------
    column : int
        Index into the form.
    name : str
    lower, upper : float
        The new bounds.
    """

    column: int = field(repr=False)
    name: str
    lower: float
    upper: float


@dataclass(frozen=True, eq=False)
class Remedy:
    """A change that keeps all whole plans, or all best ones, and makes the relaxation better.

    Attributes
    ----------
    kind : str
        One of `Kind`.
    title : str
        A few words.
    sentence : str
        What to do and why it is allowed, in the names of the model.
    names : tuple of str
        Rows and columns that it touches.
    bound_before, bound_after : float
        Optimum of the relaxation, in the model's own sense; NaN where not computed.
    fractional_before, fractional_after : int or None
        Integer columns that are fractional there; None where not computed.
    verified : str
        How it was checked that no whole plan is lost: one sentence.
    inequalities : tuple of Inequality
        Rows to add.
    row_changes : tuple of RowChange
    bound_changes : tuple of BoundChange
    dropped_rows : ndarray, int64
        Rows that the new ones replace.
    dropped_declarations : ndarray, int64
        Columns that need not be declared integer.
    """

    kind: Kind
    title: str
    sentence: str
    names: tuple[str, ...]
    bound_before: float
    bound_after: float
    fractional_before: int | None
    fractional_after: int | None
    verified: str
    inequalities: tuple[Inequality, ...] = ()
    row_changes: tuple[RowChange, ...] = ()
    bound_changes: tuple[BoundChange, ...] = ()
    dropped_rows: Indices = field(default_factory=lambda: np.empty(0, np.int64), repr=False)
    dropped_declarations: Indices = field(default_factory=lambda: np.empty(0, np.int64), repr=False)

    def apply(self, form_or_model: Any) -> Any:
        """Make the change.

        Parameters
        ----------
        form_or_model : LinearForm or Pyomo model
            The one that was explained. A Pyomo model is changed in place.

        Returns
        -------
        LinearForm or Pyomo model
            A new form; the same model.
        """
        from .on_pyomo import apply_remedy

        return apply_remedy(self, form_or_model)

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        told: dict[str, Any] = plain(self)
        return told
