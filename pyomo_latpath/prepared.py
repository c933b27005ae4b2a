"""What a solve does before it solves: normalise, split, certify, group; and what it remembers.

All of it but the numbers depends on the matrix alone. So the forms that `replace` makes from one
another share a memory, and a form that differs from the last one solved only in

| what differs              | what is worked out anew                                         |
|---------------------------|-----------------------------------------------------------------|
| costs                     | costs                                                           |
| sides or bounds           | these, and whether they let the certificates stand              |
| which columns are fixed,  | everything: other columns are substituted, other rows dropped   |
| integer, or have no bound |                                                                 |

and the walk starts from the last vertex. A remembered matrix is compared number by number.
"""

from __future__ import annotations

from collections import deque
from dataclasses import dataclass, field, replace

import numpy as np
import scipy.sparse as sp

from .certificates import BlockCertificate, Unimodular, fingerprint
from .deadline import Deadline
from .forms.blocks import Block, blocks_of
from .forms.linear_form import LinearForm, Memory
from .forms.normalise import NormalForm, normalise
from .forms.numbers import Integers
from .grouping import Group, groups_of
from .highs import LinearProgram
from .integrality.assess import certifiable, certify
from .integrality.finding import BlockFinding
from .integrality.verdicts import proven_finding

#: A structure's name and its proof.
Found = tuple[str, BlockCertificate]


@dataclass(frozen=True, eq=False)
class Rest:
    """A block without a certificate.

    Attributes
    ----------
    block : Block
    piece : NormalForm
    programs : deque, at most one LinearProgram
        Its relaxation, standing at the last optimum; taken out while it is in use.
    searched : list, at most one (str, BlockCertificate) or None
        What a longer search for a certificate came to.
    """

    block: Block
    piece: NormalForm
    programs: deque[LinearProgram] = field(default_factory=lambda: deque(maxlen=1))
    searched: list[Found | None] = field(default_factory=list)

    def within(self, normal: NormalForm) -> Rest:
        """Return the same block of another normal form with the same scaled matrix."""
        piece = normal.restrict(self.block.rows, self.block.columns, self.piece.matrix)
        return Rest(self.block, piece, self.programs)


@dataclass(frozen=True, eq=False)
class Prepared:
    """A form, ready to be solved.

    Attributes
    ----------
    normal : NormalForm
    blocks : list of Block
    found : list of (str, BlockCertificate) or None
        For each block.
    asked : list of bool
        Whether a certificate was looked for; blocks with sides that are not whole have none.
    findings : tuple of BlockFinding
        For each block with a certificate.
    groups : list of Group
        The blocks with certificates.
    rest : list of Rest
        The others.
    """

    normal: NormalForm
    blocks: list[Block]
    found: list[Found | None]
    asked: list[bool]
    findings: tuple[BlockFinding, ...]
    groups: list[Group]
    rest: list[Rest]


@dataclass(frozen=True, eq=False)
class _Remembered:
    """What the last solve prepared, and the matrix that it speaks of."""

    matrix: sp.csc_array
    prepared: Prepared

    def speaks_of(self, matrix: sp.csc_array) -> bool:
        return self.matrix.shape == matrix.shape and all(
            np.array_equal(getattr(self.matrix, part), getattr(matrix, part))
            for part in ("indptr", "indices", "data")
        )


def prepare(form: LinearForm, deadline: Deadline) -> Prepared:
    """Make a form ready to be solved, by what is remembered of its matrix as far as that goes.

    Parameters
    ----------
    form : LinearForm
    deadline : Deadline
        Blocks that are not looked at in time have no certificate.

    Returns
    -------
    Prepared
        Without blocks where rounding alone shows that there is no plan, and where columns are
        semicontinuous.

    Examples
    --------
    >>> form = LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
    ...                               col_upper=1, cost=[2, 3])
    >>> first = prepare(form, Deadline(None))
    >>> again = prepare(form.replace(cost=[4, 3]), Deadline(None))
    >>> again.found is first.found, again.groups[0].piece.cost
    (True, array([4., 3.]))
    """
    held = form.memory.content
    earlier = held.prepared if held is not None and held.speaks_of(form.matrix) else None
    # What is remembered must not remember: the form would never be freed.
    bare = replace(form, memory=Memory())
    normal = normalise(bare, None if earlier is None else earlier.normal)
    if normal.conflict is not None or form.semicontinuous.any():
        return Prepared(normal, [], [], [], (), [], [])
    if earlier is not None and normal.row_lower is earlier.normal.row_lower:
        return _with_other_costs(earlier, normal)
    if earlier is not None and normal.scaled is earlier.normal.scaled:
        prepared = _with_other_limits(earlier, normal, deadline)
    else:
        blocks = blocks_of(normal)
        asked = [certifiable(normal, block) for block in blocks]
        found = certify(normal, blocks, deadline, "linear")
        prepared = _grouped(normal, blocks, found, asked)
    if not deadline.passed:
        kept = form.matrix.copy() if earlier is None else held.matrix
        form.memory.content = _Remembered(kept, prepared)
    return prepared


def _with_other_costs(earlier: Prepared, normal: NormalForm) -> Prepared:
    groups = [
        replace(group, piece=_priced(group.piece, normal, group.columns))
        for group in earlier.groups
    ]
    rest = [
        replace(block, piece=_priced(block.piece, normal, block.block.columns))
        for block in earlier.rest
    ]
    return replace(earlier, normal=normal, groups=groups, rest=rest)


def _priced(piece: NormalForm, normal: NormalForm, columns: Integers) -> NormalForm:
    whole = columns.size == normal.columns.size
    return replace(piece, form=normal.form, cost=normal.cost if whole else normal.cost[columns])


def _with_other_limits(earlier: Prepared, normal: NormalForm, deadline: Deadline) -> Prepared:
    """Hold each block's certificate against the new sides and bounds; look for those missing."""
    asked = [certifiable(normal, block) for block in earlier.blocks]
    found: list[Found | None] = [None] * len(asked)
    unknown = []
    for k, proof in enumerate(earlier.found):
        speaks_of_sides = proof is not None and isinstance(proof[1].part, Unimodular)
        if asked[k] and earlier.asked[k] and not speaks_of_sides:
            found[k] = proof
        elif asked[k]:
            unknown.append(k)
    if unknown:
        proofs = certify(normal, [earlier.blocks[k] for k in unknown], deadline, "linear")
        for k, proof in zip(unknown, proofs, strict=True):
            found[k] = proof
    if found != earlier.found:
        return _grouped(normal, earlier.blocks, found, asked)
    return replace(
        earlier,
        normal=normal,
        asked=asked,
        findings=_findings(normal, earlier.blocks, found),
        groups=[group.within(normal) for group in earlier.groups],
        rest=[rest.within(normal) for rest in earlier.rest],
    )


def _grouped(
    normal: NormalForm, blocks: list[Block], found: list[Found | None], asked: list[bool]
) -> Prepared:
    pairs = list(zip(blocks, found, strict=True))
    return Prepared(
        normal=normal,
        blocks=blocks,
        found=found,
        asked=asked,
        findings=_findings(normal, blocks, found),
        groups=groups_of(normal, [(block, proof) for block, proof in pairs if proof]),
        rest=[
            Rest(block, normal.restrict(block.rows, block.columns))
            for block, proof in pairs
            if proof is None
        ],
    )


def _findings(
    normal: NormalForm, blocks: list[Block], found: list[Found | None]
) -> tuple[BlockFinding, ...]:
    mark = fingerprint(normal.form) if any(found) else ""
    return tuple(
        proven_finding(normal, block, proof, mark)
        for block, proof in zip(blocks, found, strict=True)
        if proof is not None
    )
