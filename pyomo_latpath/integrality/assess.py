"""Assessment: for each block a certificate, else vertices to look at, else "undecided"."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from ..certificates import fingerprint
from ..deadline import Deadline
from ..forms.blocks import Block, blocks_of
from ..forms.linear_form import LinearForm
from ..forms.normalise import NormalForm, normalise
from .certify import certify
from .finding import BlockFinding, Finding, Verdict
from .sampling import program_of
from .verdicts import conflict_finding, proven_finding, sampled_finding

#: Share of the time limit that certificates may take.
CERTIFY_SHARE = 0.5


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
