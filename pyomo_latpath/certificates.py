"""Certificates: why every vertex of a model is whole, as data, and the checker of them.

A block is proven whole by showing what its scaled matrix is (see `certificate_parts`). By
Hoffman and Kruskal (1956), a totally unimodular (TU) matrix with whole sides and whole bounds
has whole vertices only. The checker shares no code with what finds certificates; it uses
whole numbers and fractions alone, read from floats as `forms.numbers` reads them.
"""

from __future__ import annotations

import hashlib
import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from .certificate_parts import (
    KINDS,
    Conetwork,
    Network,
    Part,
    Reduced,
    Step,
    Trivial,
    Unimodular,
    part_from_dict,
)
from .certificate_reading import (
    SAFE,
    CertificateError,
    Factors,
    read_factors,
    read_indices,
    read_value,
    require,
    require_indices,
)
from .certificate_sums import R10, Pivot, Split, Sum
from .forms.linear_form import Floats, LinearForm
from .forms.numbers import SNAP, Integers, read_fractions, simplest_fraction, snap

__all__ = [
    "KINDS",
    "R10",
    "BlockCertificate",
    "Certificate",
    "CertificateError",
    "Conetwork",
    "Network",
    "Part",
    "Pivot",
    "Reduced",
    "Split",
    "Step",
    "Sum",
    "Trivial",
    "Unimodular",
    "check_certificate",
    "fingerprint",
]

SCHEMA = "latpath-certificate/1"
NESTED = "parts are nested too deeply"


@dataclass(frozen=True, eq=False)
class BlockCertificate:
    """The proof of one block.

    Attributes
    ----------
    rows, columns : ndarray, int64
        Indices into the form; parts count along these.
    row_factors, col_factors : sequence of str
        "p" or "p/q"; diag(r) A diag(c) on the block is what `part` proves.
    part : Part
    """

    rows: Integers
    columns: Integers
    row_factors: Sequence[str]
    col_factors: Sequence[str]
    part: Part

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        places = {"rows": self.rows.tolist(), "columns": self.columns.tolist()}
        factors = {"row_factors": list(self.row_factors), "col_factors": list(self.col_factors)}
        return {**places, **factors, **self.part.to_dict()}

    @classmethod
    def from_dict(cls, data: dict[str, Any]) -> BlockCertificate:
        """Read what `to_dict` wrote."""
        return cls(
            rows=read_indices(data, "rows"),
            columns=read_indices(data, "columns"),
            row_factors=tuple(read_value(data, "row_factors", list)),
            col_factors=tuple(read_value(data, "col_factors", list)),
            part=part_from_dict(data),
        )


@dataclass(frozen=True, eq=False)
class Certificate:
    """The proof of some or all blocks of a model.

    Attributes
    ----------
    fingerprint : str
        Of the form, see `fingerprint`.
    blocks : tuple of BlockCertificate
    complete : bool
        Whether all of the form is claimed, or these blocks alone.

    Examples
    --------
    >>> pair = BlockCertificate(np.array([0]), np.array([0, 1]), ["1"], ["1", "1"],
    ...                         Network(np.array([[0, 1]]), np.array([[0, 1], [1, 0]])))
    >>> check_certificate([[1, -1]], Certificate("", (pair,)))
    >>> check_certificate([[1, 1]], Certificate("", (pair,)))
    Traceback (most recent call last):
    ...
    pyomo_latpath.certificate_reading.CertificateError: block 0: its column 1 is not the tree path
    of its arc
    """

    fingerprint: str
    blocks: tuple[BlockCertificate, ...]
    complete: bool = True

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        return {
            "schema": SCHEMA,
            "fingerprint": self.fingerprint,
            "complete": self.complete,
            "blocks": [block.to_dict() for block in self.blocks],
        }

    @classmethod
    def from_dict(cls, data: Any) -> Certificate:
        """Read what `to_dict` wrote; raises CertificateError for anything else."""
        require(isinstance(data, dict), "a certificate is a JSON object")
        require(data.get("schema") == SCHEMA, f"the schema is not {SCHEMA!r}")
        blocks = read_value(data, "blocks", list)
        require(all(isinstance(block, dict) for block in blocks), "a block is not an object")
        try:
            read = tuple(BlockCertificate.from_dict(block) for block in blocks)
        except RecursionError:
            raise CertificateError(NESTED) from None
        return cls(
            fingerprint=read_value(data, "fingerprint", str),
            blocks=read,
            complete=read_value(data, "complete", bool),
        )


def fingerprint(form: LinearForm) -> str:
    """Return a digest of a form's matrix, sides and integer columns.

    Examples
    --------
    >>> form = LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
    ...                               col_upper=1, cost=[2, 3])
    >>> fingerprint(form) == fingerprint(form.replace(cost=0))
    True
    >>> fingerprint(form) == fingerprint(form.replace(row_upper=2))
    False
    """
    digest = hashlib.sha256(repr(form.shape).encode())
    for values, kind in (
        (form.matrix.indptr, "<i8"),
        (form.matrix.indices, "<i8"),
        (form.matrix.data, "<f8"),
        (form.row_lower + 0.0, "<f8"),
        (form.row_upper + 0.0, "<f8"),
        (form.integer, "|u1"),
    ):
        digest.update(np.ascontiguousarray(values, dtype=kind).tobytes())
    return digest.hexdigest()


def check_certificate(form_or_matrix: Any, certificate: Certificate | dict[str, Any]) -> None:
    """Accept a certificate silently, or refuse it.

    Of a form it shows that every vertex of the normalised relaxation (fixed columns put in,
    sides of rows and bounds of columns that are all integer rounded inwards) is whole in the
    integer columns. Of a matrix alone it shows that the matrix, as it stands, is TU. Where the
    certificate is not `complete`, it shows so for its blocks.

    Parameters
    ----------
    form_or_matrix : LinearForm, array_like or sparse array
    certificate : Certificate, or dict
        As `to_dict` makes it, read from a file.

    Raises
    ------
    CertificateError
        One sentence that says what does not hold.
    """
    if not isinstance(certificate, Certificate):
        certificate = Certificate.from_dict(certificate)
    bare = not isinstance(form_or_matrix, LinearForm)
    if bare:
        form = LinearForm.from_arrays(
            form_or_matrix, row_lower=0, row_upper=1, col_lower=0, col_upper=1, cost=0
        )
    else:
        form = form_or_matrix
        alone = certificate.fingerprint == ""
        require(not alone, "the certificate is of a matrix alone; check it against form.matrix")
        same = certificate.fingerprint == fingerprint(form)
        require(same, "the certificate was made for another model: its fingerprint differs")
    claim = _Claim(form, certificate)
    claim.check_cover()
    matrix = claim.scaled_matrix(bare)
    if not bare:
        claim.check_limits()
    k = -1
    try:
        for k, block in enumerate(certificate.blocks):
            block.part.check(claim.cut(matrix, k))
            if isinstance(block.part, Unimodular):
                require(not bare, "its claim is about sides, and a matrix has none")
                block.part.check_sides(claim.sides(block.rows))
    except CertificateError as error:
        raise CertificateError(f"block {k}: {error}") from None
    except RecursionError:
        raise CertificateError(f"block {k}: {NESTED}") from None


class _Claim:
    """A form and a certificate, laid side by side.

    Attributes
    ----------
    row_block, col_block : ndarray, int64
        Block of each row and column; -1 for none.
    fixed : ndarray, bool
        Columns that can take one value only.
    column_of, inside : ndarray
        Of each stored entry: its column, and whether it is in a block.
    """

    def __init__(self, form: LinearForm, certificate: Certificate) -> None:
        self.form, self.blocks, self.complete = form, certificate.blocks, certificate.complete
        m, n = form.shape
        self.row_block, self.row_place, self.row_factor = self._places("row", m)
        self.col_block, _, self.col_factor = self._places("col", n)
        lower, upper = snap(form.col_lower), snap(form.col_upper)
        self.fixed = np.where(
            form.integer, np.ceil(lower) >= np.floor(upper), form.col_lower >= form.col_upper
        )
        self.column_of = np.repeat(np.arange(n), np.diff(form.matrix.indptr))
        self._drop_what_trivial_blocks_do_not_speak_of()
        row_block, col_block = self.row_block[form.matrix.indices], self.col_block[self.column_of]
        self.inside = (row_block == col_block) & (row_block >= 0)
        put_in = np.flatnonzero((col_block == -1) & self.fixed[self.column_of])
        self.put_in = put_in[np.argsort(form.matrix.indices[put_in], kind="stable")]
        self.mixed = np.zeros(m, np.bool_)
        self.mixed[form.matrix.indices[self.inside & ~form.integer[self.column_of]]] = True

    def _places(self, axis: str, size: int) -> tuple[Integers, Integers, Factors]:
        """Block, place in the block, and factor of each row or column."""
        owner, place = np.full(size, -1), np.zeros(size, np.int64)
        all_places = [b.rows if axis == "row" else b.columns for b in self.blocks]
        texts: list[str] = []
        for k, (block, places) in enumerate(zip(self.blocks, all_places, strict=True)):
            factors = block.row_factors if axis == "row" else block.col_factors
            require_indices(places, size, f"block {k}")
            require((owner[places] == -1).all(), f"block {k} has a {axis} of another block")
            require(len(factors) == places.size, f"block {k} needs one factor for each {axis}")
            owner[places], place[places] = k, np.arange(places.size)
            texts += factors
        together = np.concatenate([np.empty(0, np.int64), *all_places])
        return owner, place, read_factors(size, together, texts)

    def _drop_what_trivial_blocks_do_not_speak_of(self) -> None:
        kinds = [isinstance(block.part, Trivial) for block in self.blocks]
        trivial = np.array([*kinds, False])
        self.col_block[trivial[self.col_block] & ~self.form.integer] = -1
        of_integer = (self.col_block >= 0)[self.column_of]
        spoken_of = np.zeros(self.row_block.size, np.bool_)
        spoken_of[self.form.matrix.indices[of_integer]] = True
        self.row_block[trivial[self.row_block] & ~spoken_of] = -1

    def check_cover(self) -> None:
        """Check that blocks are apart, and that integer columns are in them if all is claimed."""
        form, rows = self.form, self.form.matrix.indices
        sided = np.isfinite(form.row_lower) | np.isfinite(form.row_upper)
        put_in = ((self.col_block == -1) & self.fixed)[self.column_of]
        idle = ((self.row_block == -1) & ~sided)[rows]
        apart = self.row_block[rows] != self.col_block[self.column_of]
        astray = np.flatnonzero(apart & ~put_in & ~idle)
        if astray.size:
            row, column = rows[astray[0]], self.column_of[astray[0]]
            raise CertificateError(
                f"row {form.row_names[row]!r} and column {form.col_names[column]!r} share an entry "
                "but no block"
            )
        missing = np.flatnonzero((self.col_block == -1) & form.integer & ~self.fixed)
        if self.complete and missing.size:
            name = form.col_names[int(missing[0])]
            raise CertificateError(f"the integer column {name!r} is in no block")

    def scaled_matrix(self, bare: bool) -> sp.csc_array:
        """diag(r) A diag(c) within blocks, which must be whole, as int64; nothing elsewhere."""
        row, col = self.row_factor, self.col_factor
        signs = [(np.abs(f.num) == 1) & (f.den == 1) for f in (row, col)]
        held = (self.form.integer | bare) & (self.col_block >= 0) & ~signs[1]
        require(not held.any(), "an integer column has a factor other than 1 and -1")
        held = (self.row_block >= 0) & ~signs[0] & bare
        require(not held.any(), "a row of a bare matrix has a factor other than 1 and -1")
        rows, columns = self.form.matrix.indices[self.inside], self.column_of[self.inside]
        values = self.form.matrix.data[self.inside]
        num, den, sure = read_fractions(values)
        tops, bottoms = (
            (num, row.num[rows], col.num[columns]),
            (den, row.den[rows], col.den[columns]),
        )
        for three in (tops, bottoms):
            size = np.ones(values.size)
            for numbers in three:
                size *= np.abs(numbers.astype(np.float64))
            sure &= (size > 0) & (size < SAFE)
        top, bottom = tops[0] * tops[1] * tops[2], bottoms[0] * bottoms[1] * bottoms[2]
        for k in np.flatnonzero(~sure):
            factor = row.exact[rows[k]] * col.exact[columns[k]]
            exact = factor * simplest_fraction(float(values[k]))
            held_in = max(abs(exact.numerator), exact.denominator) < SAFE
            top[k], bottom[k] = (exact.numerator, exact.denominator) if held_in else (1, 2)
        broken = np.flatnonzero(top % bottom)
        if broken.size:
            i, j = rows[broken[0]], columns[broken[0]]
            raise CertificateError(
                f"the scaled entry of row {self.form.row_names[i]!r} at column "
                f"{self.form.col_names[j]!r} is not whole"
            )
        start = np.concatenate(([0], np.cumsum(self.inside)))[self.form.matrix.indptr]
        return sp.csc_array((top // bottom, rows, start), shape=self.form.shape)

    def cut(self, matrix: sp.csc_array, k: int) -> sp.csc_array:
        """Block k of the scaled matrix."""
        rows, columns = self.blocks[k].rows, self.blocks[k].columns
        in_order = columns.size == matrix.shape[1] and (np.diff(columns) == 1).all()
        part = matrix if in_order else matrix[:, columns]
        entries = (part.data, self.row_place[part.indices], part.indptr)
        return sp.csc_array(entries, shape=(rows.size, columns.size))

    def check_limits(self) -> None:
        """Check that rows and bounds that must not be rounded are whole once they are scaled."""
        form = self.form
        continuous = ~form.integer & (self.col_block >= 0)
        require(
            not ((self.col_block >= 0) & form.semicontinuous).any(),
            "a block has a semicontinuous column, which has no relaxation",
        )
        # Most models have whole sides and bounds as they stand: look closer only elsewhere.
        plain = (self.row_factor.num == 1) & (self.row_factor.den == 1)
        plain[form.matrix.indices[self.put_in]] = False
        plain &= _whole_or_infinite(form.row_lower) & _whole_or_infinite(form.row_upper)
        rows = np.flatnonzero(self.mixed & ~plain)
        for i, pair in zip(rows.tolist(), self.sides(rows), strict=True):
            whole = all(side is None or side.denominator == 1 for side in pair)
            require(whole, f"row {form.row_names[i]!r} has a side that is not whole")
        plain = (self.col_factor.num == 1) & (self.col_factor.den == 1)
        plain &= _whole_or_infinite(form.col_lower) & _whole_or_infinite(form.col_upper)
        for j in np.flatnonzero(continuous & ~plain).tolist():
            for bound in (form.col_lower[j], form.col_upper[j]):
                if math.isfinite(bound):
                    scaled = _near(simplest_fraction(bound) / self.col_factor.exact[j])
                    whole = scaled.denominator == 1
                    require(whole, f"column {form.col_names[j]!r} has a bound that is not whole")

    def sides(self, rows: Integers) -> list[tuple[Fraction | None, Fraction | None]]:
        """Scaled sides, fixed columns put in; rounded inwards if all columns are integer."""
        form, found = self.form, []
        for i in rows:
            shift, factor = Fraction(0), self.row_factor.exact[i]
            first, last = np.searchsorted(form.matrix.indices[self.put_in], [i, i + 1])
            for k in self.put_in[first:last]:
                j = self.column_of[k]
                bound = form.col_lower[j]
                value = Fraction(math.ceil(snap(bound))) if form.integer[j] else None
                value = simplest_fraction(bound) if value is None else value
                shift += simplest_fraction(float(form.matrix.data[k])) * value
            pair = [
                _near(factor * (simplest_fraction(side) - shift)) if math.isfinite(side) else None
                for side in (form.row_lower[i], form.row_upper[i])
            ]
            low, high = pair if factor > 0 else pair[::-1]
            if not self.mixed[i]:
                low = None if low is None else Fraction(math.ceil(low))
                high = None if high is None else Fraction(math.floor(high))
            found.append((low, high))
        return found


def _whole_or_infinite(values: Floats) -> NDArray[np.bool_]:
    return np.asarray(np.rint(values) == values)


def _near(value: Fraction) -> Fraction:
    """The value, or the whole number that it is read as."""
    whole, size = Fraction(round(value)), max(Fraction(1), abs(value))
    return whole if abs(value - whole) <= Fraction(SNAP) * size else value
