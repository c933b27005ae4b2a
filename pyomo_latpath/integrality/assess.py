"""Assessment: for each block a certificate, else vertices to look at, else "undecided".

Certificates come first, and of these the cheapest: one look at all blocks at once, then block by
block the linear-time structures, reductions, what these leave; at last sums of such matrices, and
equality systems. A new structure is one new module, and one line in `RECOGNISERS`.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from dataclasses import replace
from fractions import Fraction
from typing import Literal, Protocol

import numpy as np
import scipy.sparse as sp

from ..certificates import (
    BlockCertificate,
    CertificateError,
    Conetwork,
    Network,
    Part,
    Trivial,
    Unimodular,
    fingerprint,
)
from ..deadline import Deadline
from ..forms.blocks import Block, blocks_of
from ..forms.linear_form import LinearForm
from ..forms.normalise import NormalForm, normalise
from ..forms.numbers import EXACT, Integers, simplest_fraction
from . import incidence, interval, network, reductions, unimodular
from .finding import BlockFinding, Finding, Verdict
from .regular.clock import OutOfTime
from .regular.decompose import take_apart
from .regular.signs import odd_hole
from .regular.summand import Contradiction
from .sampling import program_of
from .verdicts import conflict_finding, proven_finding, sampled_finding

Recogniser = Callable[[sp.csc_array, Deadline], Part | None]
#: Share of the time limit that certificates may take.
CERTIFY_SHARE = 0.5
#: Seconds that taking a matrix apart may take in an assessment.
SUM_SECONDS = 10.0


def _at_once(recognise: Callable[[sp.csc_array], Part | None]) -> Recogniser:
    """A recogniser that needs no more time than reading the matrix takes."""
    return lambda matrix, deadline: recognise(matrix)


def _transposed(recognise: Callable[[sp.csc_array, Deadline], Part | None]) -> Recogniser:
    def recognise_transposed(matrix: sp.csc_array, deadline: Deadline) -> Conetwork | None:
        part = recognise(matrix.T.tocsc(), deadline)
        return Conetwork(part.tree, part.arcs) if isinstance(part, Network) else None

    return recognise_transposed


#: Linear-time tests of a matrix as it stands: the structure's name, and what recognises it.
QUICK: tuple[tuple[str, Recogniser], ...] = (
    ("incidence", _at_once(incidence.recognise)),
    ("interval", _at_once(interval.recognise)),
    ("conetwork", _transposed(_at_once(incidence.recognise))),
    ("conetwork", _transposed(_at_once(interval.recognise))),
)
#: All tests, in near-linear time, cheapest first, for what reductions leave.
RECOGNISERS: tuple[tuple[str, Recogniser], ...] = (
    *QUICK,
    ("network", network.recognise),
    ("conetwork", _transposed(network.recognise)),
)
#: What to look for: structures by `QUICK` alone; reductions and `RECOGNISERS` too; sums and systems
#: of equations alone, where the others have failed; all of these.
Effort = Literal["quick", "linear", "systems", "full"]


def assess(
    form: LinearForm, *, samples: int = 32, time_limit: float | None = None, seed: int = 0
) -> Finding:
    """Find out whether the vertices of a form's relaxation are whole, block by block.

    Parameters
    ----------
    form : LinearForm
    samples : int
        Vertices to look at in each block without a certificate.
    time_limit : float, optional
        Seconds.
    seed : int
        Of the vertex sampler.

    Returns
    -------
    Finding

    Raises
    ------
    ValueError
        For a negative number of samples or of seconds.

    Examples
    --------
    >>> form = LinearForm.from_arrays([[1, 1, 0], [0, 1, 1]], row_lower=0, row_upper=1,
    ...                               col_lower=0, col_upper=1, cost=[-1, -3, -1])
    >>> finding = assess(form)
    >>> str(finding.verdict), finding.blocks[0].structure
    ('proven', 'incidence')
    """
    if samples < 0:
        raise ValueError(f"samples is {samples}; it must be 0 or more")
    if time_limit is not None and not time_limit >= 0:
        raise ValueError(f"time_limit is {time_limit}; it must be a number of seconds from 0 on")
    deadline = Deadline(time_limit)
    normal = normalise(form)
    blocks = blocks_of(normal)
    early = deadline if time_limit is None else deadline.within(CERTIFY_SHARE * time_limit)
    mark, findings = fingerprint(form), []
    broken = conflict_finding(normal)
    certified = certify(normal, blocks, early, "linear")
    sizes = [0 if found else b.columns.size for b, found in zip(blocks, certified, strict=True)]
    shares = deadline.shared(sizes)
    for block, found, share in zip(blocks, certified, shares, strict=True):
        if broken is not None and np.isin(broken.rows, normal.rows[block.rows]).any():
            rows, columns = normal.rows[block.rows], normal.columns[block.columns]
            findings.append(replace(broken, rows=rows, columns=columns))
            broken = None
        elif found is not None:
            findings.append(proven_finding(normal, block, found, mark))
        else:
            piece = normal.restrict(block.rows, block.columns)
            findings.append(_assess_further(piece, mark, samples, seed, share))
    findings += [broken] if broken is not None else []
    return Finding(tuple(findings), normal.snapped, seed)


def _assess_further(
    piece: NormalForm, mark: str, samples: int, seed: int, deadline: Deadline
) -> BlockFinding:
    """Look at one vertex, which often refutes; then search long for a certificate; then sample."""
    first = None
    if samples and not piece.form.semicontinuous[piece.columns].any() and not deadline.passed:
        program = program_of(piece)
        first = program, program.solve(deadline=deadline)
        finding = sampled_finding(piece, 1, first, seed, deadline)
        if finding.verdict not in (Verdict.SAMPLED, Verdict.UNDECIDED):
            return finding
    block = Block(np.arange(piece.rows.size), np.arange(piece.columns.size), trivial=False)
    early = deadline.within(CERTIFY_SHARE * deadline.left)
    found = certify(piece, [block], early, "systems")[0]
    if found is not None:
        return proven_finding(piece, block, found, mark)
    return sampled_finding(piece, samples, first, seed, deadline)


def certifiable(normal: NormalForm, block: Block) -> bool:
    """Whether a block's numbers let a certificate speak of it: what it must say of A aside."""
    if normal.form.semicontinuous[normal.columns[block.columns]].any():
        return False
    if block.trivial or not normal.integer[block.columns].any():
        return True
    whole_rows, whole_sides = normal.whole_rows[block.rows], normal.whole_sides[block.rows]
    return bool(whole_rows.all() and whole_sides.all() and normal.whole_bounds[block.columns].all())


class KnownProofs(Protocol):
    """Proofs found before, by the matrix of a block.

    Attributes
    ----------
    recalled : int
        How many proofs it gave so far.
    """

    recalled: int

    def recall(self, matrix: sp.csc_array) -> tuple[str, Part] | None:
        """Return a structure's name and a proof that was checked against this matrix."""

    def keep(self, matrix: sp.csc_array, proof: tuple[str, Part], seconds: float) -> None:
        """Keep a proof that took some seconds to find."""


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
    known: dict[bytes, tuple[str, Part] | None] = {}
    shares = deadline.shared([blocks[k].columns.size for k in wide])
    for k, share in zip(wide, shares, strict=True):
        block, here = blocks[k], slice(start, start + blocks[k].columns.size)
        start = here.stop
        place[block.rows], place[-1] = np.arange(block.rows.size), block.rows.size
        proof: tuple[str, Part] | None = None
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
) -> tuple[str, Part] | None:
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
    known: dict[bytes, tuple[str, Part] | None],
) -> tuple[str, Part] | None:
    """Look for a proof of one block; those that recur cost little, as `known` has them."""
    key = b"|".join(a.tobytes() for a in (matrix.data, matrix.indices, matrix.indptr))
    if effort != "systems" and key not in known:
        known[key] = prove_tu(matrix, deadline, quick=effort == "quick")
    proof = known.get(key)
    if proof is None and effort in ("systems", "full"):
        half = deadline.within(deadline.left / 2)
        proof = _prove_sum(matrix, half) or _prove_system(normal, block, matrix, deadline)
    return proof


def _cut(matrix: sp.csc_array, here: slice, place: Integers) -> sp.csc_array:
    """The matrix of a block: its columns, its rows renumbered."""
    start = matrix.indptr[here.start : here.stop + 1]
    inner = slice(start[0], start[-1])
    entries = matrix.data[inner], place[matrix.indices[inner]], start - start[0]
    return sp.csc_array(entries, shape=(int(place[-1]), here.stop - here.start))


def _prove_system(
    normal: NormalForm, block: Block, matrix: sp.csc_array, deadline: Deadline
) -> tuple[str, Part] | None:
    """Prove a block's matrix unimodular together with its slacks, or whole for its sides."""
    lower, upper = normal.row_lower[block.rows], normal.row_upper[block.rows]
    equality = lower == upper
    sides = np.where(equality, lower, 0.0)
    if (np.abs(sides) >= EXACT).any():
        return None

    def rest(reduced: sp.csc_array) -> Part | None:
        proof = prove_tu(reduced, deadline) or _prove_sum(reduced, deadline)
        return None if proof is None else proof[1]

    part = unimodular.recognise(matrix, equality, sides.astype(np.int64), rest, deadline)
    return None if part is None else ("unimodular", part)


def _prove_sum(matrix: sp.csc_array, deadline: Deadline) -> tuple[str, Part] | None:
    """Prove a matrix totally unimodular that has no other structure, by taking it apart.

    Signs that contradict each other are found soon, and most matrices that are not TU have such.
    """
    if (np.abs(matrix.data) != 1).any():
        return None
    deadline = deadline.within(SUM_SECONDS)
    try:
        if odd_hole(matrix, deadline) is not None:
            return None
        return "sum", take_apart(matrix, deadline)
    except (Contradiction, OutOfTime):
        return None


def prove_tu(
    matrix: sp.csc_array, deadline: Deadline | None = None, *, quick: bool = False
) -> tuple[str, Part] | None:
    """Prove a matrix totally unimodular, if it has one of the known structures.

    Parameters
    ----------
    matrix : scipy.sparse.csc_array, shape (m, n), int64
        Canonical: sorted indices, no stored zeros.
    deadline : Deadline, optional
    quick : bool
        Make only the tests that take about as long as reading the matrix.

    Returns
    -------
    (str, Part) or None
        The structure's name and the proof.

    Examples
    --------
    >>> name, part = prove_tu(sp.csc_array([[1, 1, 0, 1], [0, 1, 1, 1]]))
    >>> name, part.kind
    ('incidence', 'network')
    >>> prove_tu(sp.csc_array([[1, 1], [1, -1]])) is None
    True
    """
    if (np.abs(matrix.data) != 1).any():
        return None
    deadline = deadline or Deadline(None)
    for name, recognise in QUICK:
        part = recognise(matrix, deadline)
        if part is not None:
            return name, part
    if quick or deadline.passed:
        return None
    reduction = reductions.reduce_matrix(matrix, deadline)
    if not reduction.rows.size and not reduction.columns.size:
        empty = np.empty((0, 2), np.int64)
        return "network", reduction.prove(Network(empty, empty))
    for name, recognise in RECOGNISERS if reduction.steps else RECOGNISERS[len(QUICK) :]:
        part = None if deadline.passed else recognise(reduction.matrix, deadline)
        if part is not None:
            whole = reduction.prove(part)
            if isinstance(whole, Network) and (reduction.steps or name == "network"):
                path = name != "incidence" and np.bincount(whole.tree.ravel()).max() <= 2
                name = "interval" if path else "network"
            return name, whole
    return None


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
