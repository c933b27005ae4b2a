"""What a batch is made of: instances that a worker can load by itself."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from pathlib import Path
from typing import Protocol

import numpy as np

from ..forms.from_file import read
from ..forms.linear_form import LinearForm


class Instance(Protocol):
    """One piece of a batch; it is pickled on its way to a worker.

    Whatever many instances have in common is held as a `SharedForm`: local workers get that once.
    """

    @property
    def name(self) -> str:
        """Unique in the batch, and the same when the batch is started again."""

    def fingerprint(self) -> str:
        """Digest of the source; another one when the source has changed.

        Raises
        ------
        OSError, ValueError
            As `load`.
        """

    def load(self) -> LinearForm:
        """Read, build or copy the form.

        Raises
        ------
        OSError
            Where a file cannot be read.
        ValueError
            Where what it holds is no model; the sentence names the place.
        """


@dataclass(frozen=True, eq=False)
class SharedForm:
    """A form that many instances build on.

    Attributes
    ----------
    key : str
        Its `form_digest`.
    form : LinearForm
    """

    key: str
    form: LinearForm

    @classmethod
    def of(cls, form: LinearForm) -> SharedForm:
        """Share a form."""
        return cls(form_digest(form), form)


@dataclass(frozen=True)
class FileInstance:
    """A model file; its name is its path as the user wrote it."""

    name: str

    def fingerprint(self) -> str:
        return hashlib.sha256(Path(self.name).read_bytes()).hexdigest()

    def load(self) -> LinearForm:
        return read(self.name)


@dataclass(frozen=True, eq=False)
class FormInstance:
    """A form that travels with its instance, and the seconds that it took to compile."""

    name: str
    form: LinearForm
    compile_seconds: float = 0.0

    def fingerprint(self) -> str:
        return form_digest(self.form)

    def load(self) -> LinearForm:
        return self.form


@dataclass(frozen=True)
class BrokenInstance:
    """One that could not even be made, say a Pyomo model that is not linear."""

    name: str
    sentence: str

    def fingerprint(self) -> str:
        return hashlib.sha256(self.sentence.encode()).hexdigest()

    def load(self) -> LinearForm:
        raise ValueError(self.sentence)


def form_digest(form: LinearForm) -> str:
    """Digest of all numbers of a form; names do not count.

    Examples
    --------
    >>> form = LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
    ...                               col_upper=1, cost=[2, 3])
    >>> form_digest(form) == form_digest(form.replace(cost=[2, 4]))
    False
    """
    digest = hashlib.sha256(repr((form.shape, form.offset + 0.0, form.sense)).encode())
    for values, kind in (
        (form.matrix.indptr, "<i8"),
        (form.matrix.indices, "<i8"),
        (form.matrix.data, "<f8"),
        (form.row_lower + 0.0, "<f8"),
        (form.row_upper + 0.0, "<f8"),
        (form.col_lower + 0.0, "<f8"),
        (form.col_upper + 0.0, "<f8"),
        (form.cost + 0.0, "<f8"),
        (form.integer, "|u1"),
        (form.semicontinuous, "|u1"),
    ):
        digest.update(np.ascontiguousarray(values, dtype=kind).tobytes())
    return digest.hexdigest()
