"""What can be done about a fractional relaxation: one change of the model, checked, as data."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from fractions import Fraction
from typing import TYPE_CHECKING, Any, Literal

import numpy as np
from numpy.typing import NDArray

from ...forms.linear_form import LinearForm
from ..plain import plain

if TYPE_CHECKING:
    from .unchanged import Explained

Indices = NDArray[np.int64]
Floats = NDArray[np.float64]

#: What a remedy does: round sides, bounds or coefficients inwards; put several rows in place of
#: one; add inequalities; drop integer declarations.
Kind = Literal["round", "tighten", "split", "cut", "drop"]


@dataclass(frozen=True, eq=False)
class Derivation:
    """How an inequality follows: a sum of rows and bounds, its right side rounded down.

    Rows are taken after they were scaled to coprime whole numbers and their sides rounded
    inwards. A multiplier above 0 belongs to an upper side or bound, one below 0 to a lower one.

    Attributes
    ----------
    rows : ndarray, shape (p,), int64
        Indices into the form that the remedies before this one make of the model; those after
        its last row are this remedy's own inequalities, in their order.
    row_names : tuple of str, length p
    row_multipliers : tuple of Fraction, length p
    columns : ndarray, shape (q,), int64
        Columns whose bounds are added.
    column_names : tuple of str, length q
    bound_multipliers : tuple of Fraction, length q
    """

    rows: Indices = field(repr=False)
    row_names: tuple[str, ...]
    row_multipliers: tuple[Fraction, ...]
    columns: Indices = field(repr=False)
    column_names: tuple[str, ...]
    bound_multipliers: tuple[Fraction, ...]


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
    derivation : Derivation or None
        Of a cut.
    """

    name: str
    columns: Indices = field(repr=False)
    column_names: tuple[str, ...]
    coefficients: Floats
    lower: float
    upper: float
    derivation: Derivation | None = None


@dataclass(frozen=True, eq=False)
class RowChange:
    """A row with other coefficients or sides, told in full.

    Attributes
    ----------
    row : int
        Index into the form.
    name : str
    columns : ndarray, shape (k,), int64
        All columns of the new row.
    column_names : tuple of str, length k
    coefficients : ndarray, shape (k,), float64
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
    """A change that keeps all whole plans (or a best one), and what it does to the relaxation.

    Each goes alone, and several go together in any order. All hold for the rows, sides, bounds
    and domains that were explained, whatever the costs; after other data, explain again.

    Attributes
    ----------
    kind : str
        One of `Kind`.
    name : str
        What the rows that it brings are called, 'opening_split' say.
    title : str
        A few words.
    sentence : str
        What to do and why it is allowed, in the names of the model.
    names : tuple of str
        Rows and columns that it touches.
    bound_before, bound_after : float
        Optimum of the relaxation as declared, in the model's own sense, without and with this
        remedy alone; NaN where not computed.
    fractional_before, fractional_after : int or None
        Columns declared integer that are fractional there; None where not computed.
    bound_together : float
        With all remedies of the explanation up to this one.
    fractional_together : int or None
    verified : str
        How it was checked that no whole plan is lost: one sentence.
    inequalities : tuple of Inequality
        Rows to add.
    row_changes : tuple of RowChange
    bound_changes : tuple of BoundChange
    dropped_rows : ndarray, int64
        Rows that the new ones replace.
    dropped_row_names : tuple of str
    dropped_declarations : ndarray, int64
        Columns that need not be declared integer.
    dropped_declaration_names : tuple of str
    explained : Explained or None
        The model that it was found for, and the remedies found with it; None where it was made
        by hand, and is not held against any model.
    """

    kind: Kind
    name: str
    title: str
    sentence: str
    names: tuple[str, ...]
    verified: str
    bound_before: float = math.nan
    bound_after: float = math.nan
    fractional_before: int | None = None
    fractional_after: int | None = None
    bound_together: float = math.nan
    fractional_together: int | None = None
    inequalities: tuple[Inequality, ...] = ()
    row_changes: tuple[RowChange, ...] = ()
    bound_changes: tuple[BoundChange, ...] = ()
    dropped_rows: Indices = field(default_factory=lambda: np.empty(0, np.int64), repr=False)
    dropped_row_names: tuple[str, ...] = ()
    dropped_declarations: Indices = field(default_factory=lambda: np.empty(0, np.int64), repr=False)
    dropped_declaration_names: tuple[str, ...] = ()
    explained: Explained | None = field(default=None, repr=False)

    def apply_to(self, form: LinearForm) -> LinearForm:
        """Return the form with the change made.

        Parameters
        ----------
        form : LinearForm
            The one that was explained, or what `apply_to` of other remedies made of it; its
            costs may be others.

        Raises
        ------
        TypeError
            For anything but a form.
        ValueError
            If a row or column of the remedy is not at its place in the form, if a row or a bound
            has changed since it was explained, or if the remedy was made already.
        """
        from .changes import apply_to_form

        return apply_to_form(self, form)

    def apply(self, model: Any) -> Any:
        """Make the change in a Pyomo model, in place.

        Parameters
        ----------
        model : Pyomo model
            The one that was explained, or one with the same names, rows and bounds, before or
            after other remedies of the same explanation. Its costs may be others.

        Returns
        -------
        Pyomo Constraint or None
            The new rows, one indexed component; None where the remedy brings no rows.

        Raises
        ------
        TypeError
            For anything but a Pyomo model or block.
        ValueError
            If the model has no row or variable of a name, if a row or a bound has changed since
            it was explained, or if the remedy was made already; nothing is changed then.
        """
        from .on_pyomo import apply_to_model

        return apply_to_model(self, model)

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        told: dict[str, Any] = plain(self)
        return told
