"""Families: one form with changed costs, sides or bounds, member by member.

What recognition finds out depends on the matrix alone, so the members of a family share it, and
each walk starts from the vertex where the last one ended (see `prepared`). A loop over
`form.replace(...)` gains as much; a `Family` reads the changes from a table, and its members are
instances of a batch, to whose workers the form travels once.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import ArrayLike

from ..forms.file_text import ModelFileError
from ..forms.linear_form import LinearForm
from .family_tables import KINDS, Entries, Line, lines_of_arrays, lines_of_file
from .instance import SharedForm


@dataclass(frozen=True, eq=False)
class Member:
    """One member of a family, an instance of a batch.

    Attributes
    ----------
    name : str
    base : SharedForm
        The form that all members share.
    changes : mapping of str to Entries
        By what is changed: 'cost', 'row_lower', 'row_upper', 'col_lower' or 'col_upper'.
    error : ValueError or None
        Why the table does not make sense here; the other members are not touched by it.
    """

    name: str
    base: SharedForm
    changes: Mapping[str, Entries]
    error: ValueError | None = None

    def fingerprint(self) -> str:
        """Digest of the shared form and of what is changed in it."""
        digest = hashlib.sha256(f"{self.base.key} {self.error}".encode())
        for what, entries in sorted(self.changes.items()):
            digest.update(what.encode())
            if entries.places is not None:
                digest.update(entries.places.astype("<i8").tobytes())
            digest.update(entries.values.astype("<f8").tobytes())
        return digest.hexdigest()

    def load(self) -> LinearForm:
        """Return the member as a form; its matrix is the very one of the shared form.

        Raises
        ------
        ValueError
            For a line of the table that makes no sense (names file and line), and as
            `LinearForm.replace`.

        Examples
        --------
        >>> form = LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
        ...                               col_upper=1, cost=[2, 3])
        >>> changes = {"cost": Entries(np.array([1]), np.array([9.0]))}
        >>> Member("dear", SharedForm.of(form), changes).load().cost
        array([2., 9.])
        """
        if self.error is not None:
            raise self.error
        form = self.base.form
        vectors = {
            what: entries.put_into(getattr(form, what)) for what, entries in self.changes.items()
        }
        return form.replace(**vectors)


class Family:
    """A form and what its members change.

    Parameters
    ----------
    form : LinearForm
    changes : path, mapping of str to array_like, or iterable of mappings
        A table: a .csv, .parquet, .npz or .npy file in a layout of `family_tables`, or arrays as
        an .npz file holds them. Or one mapping for each member, from what is changed ('cost',
        'row_lower', …) to the whole new vector; an iterable that is no sequence serves one pass.

    Raises
    ------
    FileNotFoundError
        As the operating system says it.
    ModelFileError, ValueError
        For a table that cannot be read, has no members, or whose header or shape does not fit the
        form. What is wrong in one line only is that member's error, raised by its `load()`.

    Examples
    --------
    Two nights with other costs for the same two vans:

    >>> form = LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
    ...                               col_upper=1, cost=[2, 3], col_names=["van", "cart"])
    >>> nights = Family(form, {"cost": [[2, 3], [5, 4]], "instance": ["mon", "tue"]})
    >>> [(member.name, member.load().cost.tolist()) for member in nights]
    [('mon', [2.0, 3.0]), ('tue', [5.0, 4.0])]
    """

    def __init__(
        self,
        form: LinearForm,
        changes: str | Path | Mapping[str, ArrayLike] | Iterable[Mapping[str, ArrayLike]],
    ) -> None:
        self.base = SharedForm.of(form)
        self._changes = changes
        # What is wrong with a whole table is told at once.
        if isinstance(changes, str | Path | Mapping) and next(self._lines(), None) is None:
            if isinstance(changes, Mapping):
                raise ValueError("the changes are those of no member")
            raise ModelFileError(changes, None, "the table has no members")

    def __iter__(self) -> Iterator[Member]:
        for line in self._lines():
            yield Member(line.instance, self.base, line.changes, line.error)

    def _lines(self) -> Iterator[Line]:
        changes = self._changes
        if isinstance(changes, str | Path):
            return lines_of_file(Path(changes), self.base.form)
        if isinstance(changes, Mapping):
            return lines_of_arrays(changes, self.base.form)
        return _lines_of_vectors(changes)


def _lines_of_vectors(changes: Iterable[Mapping[str, ArrayLike]]) -> Iterator[Line]:
    """Whole vectors, member by member; `LinearForm.replace` checks their sizes."""
    for k, vectors in enumerate(changes, start=1):
        unknown = [what for what in vectors if what not in KINDS]
        if unknown:
            told = f"member {k} changes {unknown[0]!r}; it can change {', '.join(KINDS)}"
            yield Line(str(k), {}, ValueError(told))
            continue
        try:
            entries = {w: Entries(None, np.array(v, np.float64)) for w, v in vectors.items()}
            yield Line(str(k), entries)
        except (TypeError, ValueError) as error:
            yield Line(str(k), {}, ValueError(f"member {k}: {error}"))
