"""From a proof, or from vertices seen, to the verdict on a block and a sentence that says why."""

from __future__ import annotations

import numpy as np

from ..certificates import BlockCertificate, Certificate, fingerprint
from ..deadline import Deadline
from ..forms.blocks import Block
from ..forms.normalise import NormalForm
from ..highs import LinearProgram, LpResult
from .finding import BlockFinding, Verdict
from .regular.clock import OutOfTime
from .regular.conflict import determinant
from .regular.signs import odd_hole
from .sampling import Sample, sample_vertices
from .sentences import describe_part

#: Seconds that the search for what speaks against total unimodularity may take.
REASON_SECONDS = 0.1
#: Why the structure makes all vertices whole.
BECAUSE = {
    "trivial": "each row bounds one column, or no column is integer",
    "incidence": "at most two nonzeros in each column, on two sides (Heller and Tompkins 1956)",
    "interval": "the nonzeros of each column are consecutive rows",
    "network": "a network matrix: each column is a path in a tree",
    "conetwork": "the transpose of a network matrix: each row is a path in a tree",
    "sum": "put together from network matrices, their transposes and R10 (Seymour 1980)",
    "unimodular": "an equality system with a unimodular matrix (Schrijver 1986, section 19.1)",
}


def proven_finding(
    normal: NormalForm, block: Block, found: tuple[str, BlockCertificate], mark: str | None = None
) -> BlockFinding:
    """Return the verdict on a block with a certificate.

    Parameters
    ----------
    normal : NormalForm
    block : Block
    found : (str, BlockCertificate)
        As `certify` returns it.
    mark : str, optional
        The form's fingerprint, where it is known already.
    """
    structure, certificate = found
    reason = BECAUSE[structure]
    if structure == "sum":
        reason = describe_part(certificate.part, block.rows.size, block.columns.size)[0]
        reason += " (Seymour 1980)"
    mark = fingerprint(normal.form) if mark is None else mark
    return BlockFinding(
        rows=normal.rows[block.rows],
        columns=normal.columns[block.columns],
        verdict=Verdict.PROVEN,
        structure=structure,
        certificate=Certificate(mark, (certificate,), complete=False),
        witness=None,
        samples=0,
        reason=reason,
    )


def conflict_finding(normal: NormalForm) -> BlockFinding | None:
    """Return the verdict on a row or column that rounding alone shows to be infeasible."""
    conflict = normal.conflict
    if conflict is None:
        return None
    place, none = np.array([conflict.index]), np.empty(0, np.int64)
    return BlockFinding(
        rows=place if conflict.kind == "row" else none,
        columns=place if conflict.kind == "column" else none,
        verdict=Verdict.PROVEN,
        structure=None,
        certificate=None,
        witness=None,
        samples=0,
        reason=f"infeasible: {conflict.reason}",
    )


def sampled_finding(
    piece: NormalForm,
    samples: int,
    first: tuple[LinearProgram, LpResult] | None,
    seed: int,
    deadline: Deadline,
) -> BlockFinding:
    """Return the verdict on a block without a certificate, by vertices.

    Parameters
    ----------
    piece : NormalForm
        The block.
    samples : int
        Vertices to look at, the optimum of the true objective included.
    first : pair of LinearProgram and LpResult, or None
        Its linear program with the outcome for the true objective, where these are known. It
        is looked at even where no samples are asked.
    seed : int
    deadline : Deadline
    """
    if piece.form.semicontinuous[piece.columns].any():
        sample = Sample(0)
        verdict, reason = Verdict.UNDECIDED, "it has semicontinuous columns: no linear relaxation"
    else:
        sample = sample_vertices(piece, samples=samples, seed=seed, deadline=deadline, first=first)
        verdict, reason = _judge(piece, sample, samples, deadline)
    return BlockFinding(
        rows=piece.rows,
        columns=piece.columns,
        verdict=verdict,
        structure=None,
        certificate=None,
        witness=sample.witness,
        samples=sample.count,
        reason=reason,
    )


def _judge(
    piece: NormalForm, sample: Sample, asked: int, deadline: Deadline
) -> tuple[Verdict, str]:
    if sample.infeasible:
        if sample.conflict is None:
            return Verdict.UNDECIDED, "it seems to be infeasible, but not beyond doubt"
        rows = _listed([piece.form.row_names[int(piece.rows[i])] for i in sample.conflict])
        return Verdict.PROVEN, f"infeasible: no point within all bounds satisfies {rows}"
    obstacle = _obstacle(piece, deadline)
    if sample.witness is not None:
        integer = dict(zip(piece.columns.tolist(), piece.integer.tolist(), strict=True))
        column, value = next(
            (j, value)
            for j, value in zip(sample.witness.columns.tolist(), sample.witness.values, strict=True)
            if integer[j] and value.denominator > 1
        )
        name = piece.form.col_names[column]
        return Verdict.REFUTED, f"at a vertex, column {name!r} is {value}; {obstacle}"
    if sample.unconfirmed:
        return Verdict.UNDECIDED, f"a vertex looks fractional, but not beyond doubt; {obstacle}"
    if asked and sample.count:
        return Verdict.SAMPLED, f"{sample.count} vertices are whole; {obstacle}"
    return Verdict.UNDECIDED, f"no vertex was looked at; {obstacle}"


def _listed(names: list[str]) -> str:
    """Name a few rows."""
    shown = ", ".join(repr(name) for name in names[:3])
    return f"row{'s' * (len(names) > 1)} {shown}" + (
        f" and {len(names) - 3} more together" if len(names) > 3 else ""
    )


def _obstacle(piece: NormalForm, deadline: Deadline) -> str:
    """Why there is no certificate, as far as a look at the numbers tells."""
    form = piece.form
    for kind, names, places, whole, what in (
        ("row", form.row_names, piece.rows, piece.whole_rows, "coefficients that"),
        ("row", form.row_names, piece.rows, piece.whole_sides, "a side that"),
        ("column", form.col_names, piece.columns, piece.whole_bounds, "a bound that"),
    ):
        if not whole.all():
            name = names[int(places[np.argmin(whole)])]
            verb = "scaling does not make" if what != "a side that" else "is not"
            return f"{kind} {name!r} has {what} {verb} whole"
    large = np.flatnonzero(np.abs(piece.matrix.data) != 1)
    if large.size:
        row = form.row_names[int(piece.rows[piece.matrix.indices[large[0]]])]
        place = np.searchsorted(piece.matrix.indptr, large[0], side="right") - 1
        column = form.col_names[int(piece.columns[place])]
        entry = piece.matrix.data[large[0]]
        return f"row {row!r} has the coefficient {entry:g} at column {column!r} after scaling"
    return _contradiction(piece, deadline) or "the matrix has no structure known here"


def _contradiction(piece: NormalForm, deadline: Deadline) -> str | None:
    """Name an odd cycle, which shows that a matrix of 0, 1 and -1 is not totally unimodular."""
    matrix = piece.matrix.astype(np.int64)
    try:
        lines = odd_hole(matrix, deadline.within(REASON_SECONDS))
    except OutOfTime:
        return None
    if lines is None:
        return None
    m = matrix.shape[0]
    rows, columns = ([k for k in lines if k < m], [k - m for k in lines if k >= m])
    value = determinant(matrix[rows, :][:, columns].toarray())
    names = _listed([piece.form.row_names[int(piece.rows[i])] for i in sorted(rows)])
    return f"{names} and as many columns have determinant {value}"
