"""Certificates of blocks: for each the cheapest that is found.

One look at all blocks at once, then block by block the linear-time structures, reductions, what
these leave; at last sums of such matrices, and systems of equations.
"""

from __future__ import annotations

import time
from collections.abc import Sequence
from fractions import Fraction
from typing import Literal, Protocol

import numpy as np
import scipy.sparse as sp

from ..certificates import (
    BlockCertificate,
    CertificateError,
    Network,
    Part,
    Trivial,
    Unimodular,
)
from ..deadline import Deadline
from ..forms.blocks import Block
from ..forms.normalise import NormalForm
from ..forms.numbers import EXACT, Integers, simplest_fraction
from . import incidence, unimodular
from .recognise import Proof, prove_sum, prove_tu

#: What to look for: structures by `QUICK` alone; reductions and `RECOGNISERS` too; sums and systems
#: of equations alone, where the others have failed; all of these.
Effort = Literal["quick", "linear", "systems", "full"]


class KnownProofs(Protocol):
    """Proofs found before, by the matrix of a block.

    Attributes
    ----------
    recalled : int
        How many proofs it gave so far.
    """

    recalled: int

    def recall(self, matrix: sp.csc_array) -> Proof | None:
        """Return a structure's name and a proof that was checked against this matrix."""

    def keep(self, matrix: sp.csc_array, proof: Proof, seconds: float) -> None:
        """Keep a proof that took some seconds to find."""


def certifiable(normal: NormalForm, block: Block) -> bool:
    """Whether a block's numbers let a certificate speak of it: what it must say of A aside."""
    if normal.form.semicontinuous[normal.columns[block.columns]].any():
        return False
    if block.trivial or not normal.integer[block.columns].any():
        return True
    whole_rows, whole_sides = normal.whole_rows[block.rows], normal.whole_sides[block.rows]
    return bool(whole_rows.all() and whole_sides.all() and normal.whole_bounds[block.columns].all())


def certify(
    normal: NormalForm,
    blocks: Sequence[Block],
    deadline: Deadline,
    effort: Effort = "full",
    store: KnownProofs | None = None,
) -> list[tuple[str, BlockCertificate] | None]:
    """Look for a certificate of each block.

    Parameters
    ----------
    normal : NormalForm
    blocks : sequence of Block
    deadline : Deadline
        Blocks that were not looked at in time have no certificate.
    effort : 'quick', 'linear', 'systems' or 'full'
        Tests that take about as long as reading the matrix; all in near-linear time; sums and
        systems of equations alone, where the others have failed; all.
    store : KnownProofs, optional
        Asked before a search, and told what one finds.

    Returns
    -------
    list of (str, BlockCertificate) or None
        The structure's name and the proof.
    """
    found: list[tuple[str, BlockCertificate] | None] = [None] * len(blocks)
    wide: list[int] = []
    for k, block in enumerate(blocks):
        if not certifiable(normal, block):
            continue
        if block.trivial or not normal.integer[block.columns].any():
            found[k] = "trivial", _trivial_certificate(normal, block)
        else:
            wide.append(k)
    if not wide:
        return found
    columns = np.concatenate([blocks[k].columns for k in wide])
    everything = columns.size == normal.columns.size and len(wide) == 1
    part = normal.matrix if everything else normal.matrix[:, columns]
    matrix = sp.csc_array((part.data.astype(np.int64), part.indices, part.indptr), part.shape)
    star, fits = incidence.star(matrix)
    start, place = 0, np.empty(matrix.shape[0] + 1, np.int64)
    known: dict[bytes, Proof | None] = {}
    shares = deadline.shared([blocks[k].columns.size for k in wide])
    for k, share in zip(wide, shares, strict=True):
        block, here = blocks[k], slice(start, start + blocks[k].columns.size)
        start = here.stop
        place[block.rows], place[-1] = np.arange(block.rows.size), block.rows.size
        proof: Proof | None = None
        if fits[here].all():
            proof = "incidence", Network(place[star.tree[block.rows]], place[star.arcs[here]])
        elif not share.passed:
            inner = _cut(matrix, here, place)
            proof = None if store is None else _recalled(store, normal, block, inner)
            if proof is None:
                begun = time.perf_counter()
                proof = _search(normal, block, inner, share, effort, known)
                if proof is not None and store is not None:
                    store.keep(inner, proof, time.perf_counter() - begun)
        if proof is not None:
            found[k] = proof[0], _block_certificate(normal, block, proof[1])
    return found


def _recalled(
    store: KnownProofs, normal: NormalForm, block: Block, matrix: sp.csc_array
) -> Proof | None:
    """A proof from the store, if it holds for the block's sides as well."""
    proof = store.recall(matrix)
    if proof is not None and isinstance(proof[1], Unimodular):
        lower, upper = (
            [Fraction(side) if np.isfinite(side) else None for side in sides[block.rows].tolist()]
            for sides in (normal.row_lower, normal.row_upper)
        )
        try:
            proof[1].check_sides(list(zip(lower, upper, strict=True)))
        except CertificateError:
            return None
    return proof


def _search(
    normal: NormalForm,
    block: Block,
    matrix: sp.csc_array,
    deadline: Deadline,
    effort: Effort,
    known: dict[bytes, Proof | None],
) -> Proof | None:
    """Look for a proof of one block; those that recur cost little, as `known` has them."""
    key = b"|".join(a.tobytes() for a in (matrix.data, matrix.indices, matrix.indptr))
    if effort != "systems" and key not in known:
        known[key] = prove_tu(matrix, deadline, quick=effort == "quick")
    proof = known.get(key)
    if proof is None and effort in ("systems", "full"):
        half = deadline.within(deadline.left / 2)
        proof = prove_sum(matrix, half) or _prove_system(normal, block, matrix, deadline)
    return proof


def _cut(matrix: sp.csc_array, here: slice, place: Integers) -> sp.csc_array:
    """The matrix of a block: its columns, its rows renumbered."""
    start = matrix.indptr[here.start : here.stop + 1]
    inner = slice(start[0], start[-1])
    entries = matrix.data[inner], place[matrix.indices[inner]], start - start[0]
    return sp.csc_array(entries, shape=(int(place[-1]), here.stop - here.start))


def _prove_system(
    normal: NormalForm, block: Block, matrix: sp.csc_array, deadline: Deadline
) -> Proof | None:
    """Prove a block's matrix unimodular together with its slacks, or whole for its sides."""
    lower, upper = normal.row_lower[block.rows], normal.row_upper[block.rows]
    equality = lower == upper
    sides = np.where(equality, lower, 0.0)
    if (np.abs(sides) >= EXACT).any():
        return None

    def rest(reduced: sp.csc_array) -> Part | None:
        proof = prove_tu(reduced, deadline) or prove_sum(reduced, deadline)
        return None if proof is None else proof[1]

    part = unimodular.recognise(matrix, equality, sides.astype(np.int64), rest, deadline)
    return None if part is None else ("unimodular", part)


def _trivial_certificate(normal: NormalForm, block: Block) -> BlockCertificate:
    """Each row bounds one column; factors turn the coefficients of integer columns into +-1."""
    rows, columns = normal.rows[block.rows], normal.columns[block.columns]
    factors = _texts(normal.row_num[block.rows], normal.row_den[block.rows])
    unread = np.flatnonzero(~normal.whole_rows[block.rows])
    if unread.size and block.trivial:
        by_row = normal.form.matrix[rows[unread], :][:, columns].tocsr()
        for k, value in zip(unread.tolist(), by_row.data.tolist(), strict=True):
            factors[k] = str(1 / simplest_fraction(value))
    return BlockCertificate(rows, columns, tuple(factors), ("1",) * columns.size, Trivial())


def _block_certificate(normal: NormalForm, block: Block, part: Part) -> BlockCertificate:
    return BlockCertificate(
        rows=normal.rows[block.rows],
        columns=normal.columns[block.columns],
        row_factors=tuple(_texts(normal.row_num[block.rows], normal.row_den[block.rows])),
        col_factors=tuple(_texts(normal.col_num[block.columns], normal.col_den[block.columns])),
        part=part,
    )


def _texts(num: Integers, den: Integers) -> list[str]:
    """Fractions in lowest terms as "p" or "p/q"."""
    if (num == 1).all() and (den == 1).all():
        return ["1"] * num.size
    pairs = zip(num.tolist(), den.tolist(), strict=True)
    return [str(p) if q == 1 else f"{p}/{q}" for p, q in pairs]
