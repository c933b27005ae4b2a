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

import hashlib
from collections import OrderedDict, deque
from dataclasses import dataclass, field, replace

import numpy as np

from .certificates import BlockCertificate, Unimodular, fingerprint
from .deadline import Deadline
from .forms.blocks import Block, blocks_of
from .forms.linear_form import LinearForm, Memory
from .forms.normalise import NormalForm, normalise
from .forms.numbers import Integers
from .grouping import Group, groups_of
from .integrality.certify import KnownProofs, certifiable, certify
from .integrality.finding import BlockFinding
from .integrality.verdicts import proven_finding
from .relaxation import Relaxation

#: A structure's name and its proof.
Found = tuple[str, BlockCertificate]
#: So many linear programs are kept from one solve to the next.
MOST_PROGRAMS = 200
#: So many matrices are remembered: even the smallest one takes 200 kB with all that is known of it.
MOST_MATRICES = 64


@dataclass(frozen=True, eq=False)
class Rest:
    """A block without a certificate.

    Attributes
    ----------
    block : Block
    piece : NormalForm
    last : deque, at most one Relaxation
        The last one solved; taken out while it is in use. Where there are very many blocks, it
        holds none: each linear program takes a tenth of a megabyte.
    searched : list, at most one (str, BlockCertificate) or None
        What a longer search for a certificate came to.
    """

    block: Block
    piece: NormalForm
    last: deque[Relaxation]
    searched: list[Found | None] = field(default_factory=list)

    def within(self, normal: NormalForm) -> Rest:
        """Return the same block of another normal form with the same scaled matrix."""
        piece = normal.restrict(self.block.rows, self.block.columns, self.piece.matrix)
        return Rest(self.block, piece, self.last)


@dataclass(frozen=True, eq=False)
class Prepared:
    """A form, ready to be solved.

    Attributes
    ----------
    normal : NormalForm
    blocks : list of Block
    found : list of (str, BlockCertificate) or None
        For each block.
    findings : tuple of BlockFinding
        For each block with a certificate.
    groups : list of Group
        The blocks with certificates.
    rest : list of Rest
        The others.
    recognition : str
        'found' where recognition looked at the matrix, 'stored' where a store had proofs of it,
        'remembered' where an earlier solve had left them.
    """

    normal: NormalForm
    blocks: list[Block]
    found: list[Found | None]
    findings: tuple[BlockFinding, ...]
    groups: list[Group]
    rest: list[Rest]
    recognition: str


def prepare(form: LinearForm, deadline: Deadline, store: KnownProofs | None = None) -> Prepared:
    """Make a form ready to be solved, by what is remembered of its matrix as far as that goes.

    Parameters
    ----------
    form : LinearForm
    deadline : Deadline
        Blocks that are not looked at in time have no certificate.
    store : KnownProofs, optional
        Asked for the proofs that are not remembered.

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
    earlier = form.memory.content
    if earlier is not None and not _same_matrix(earlier.normal.form, form):
        earlier = None
    if earlier is not None and _same_limits(earlier.normal.form, form):
        return _with_other_costs(earlier, replace(form, memory=Memory()))
    normal = normalise(_copy(form), None if earlier is None else earlier.normal.scaled)
    if normal.conflict is not None or form.semicontinuous.any():
        return Prepared(normal, [], [], (), [], [], "found")
    if earlier is not None and normal.scaled is earlier.normal.scaled:
        prepared = _with_other_limits(earlier, normal, deadline, store)
    else:
        blocks = blocks_of(normal)
        found, recognition = _certify(normal, blocks, deadline, store)
        prepared = _grouped(normal, blocks, found, recognition)
    if not deadline.passed:
        form.memory.content = prepared
    return prepared


def _same_matrix(form: LinearForm, other: LinearForm) -> bool:
    one, two = form.matrix, other.matrix
    pairs = (one.indptr, two.indptr), (one.indices, two.indices), (one.data, two.data)
    return one.shape == two.shape and all(np.array_equal(a, b) for a, b in pairs)


def _same_limits(form: LinearForm, other: LinearForm) -> bool:
    names = "row_lower row_upper col_lower col_upper integer semicontinuous"
    return all(np.array_equal(getattr(form, k), getattr(other, k)) for k in names.split())


def _copy(form: LinearForm) -> LinearForm:
    """Return a form to remember: out of reach of its owner, and without a memory of its own."""
    vectors = "row_lower row_upper col_lower col_upper cost integer semicontinuous"
    copies = {name: getattr(form, name).copy() for name in vectors.split()}
    return replace(form, matrix=form.matrix.copy(), memory=Memory(), **copies)


def _with_other_costs(earlier: Prepared, form: LinearForm) -> Prepared:
    normal = earlier.normal.priced_as(form)
    groups = [
        replace(group, piece=_priced(group.piece, normal, group.columns))
        for group in earlier.groups
    ]
    rest = [
        replace(block, piece=_priced(block.piece, normal, block.block.columns))
        for block in earlier.rest
    ]
    return replace(earlier, normal=normal, groups=groups, rest=rest, recognition="remembered")


def _priced(piece: NormalForm, normal: NormalForm, columns: Integers) -> NormalForm:
    whole = columns.size == normal.columns.size
    return normal if whole else replace(piece, form=normal.form, cost=normal.cost[columns])


def _with_other_limits(
    earlier: Prepared, normal: NormalForm, deadline: Deadline, store: KnownProofs | None
) -> Prepared:
    """Hold each block's certificate against the new sides and bounds; look for those missing."""
    found: list[Found | None] = [None] * len(earlier.blocks)
    unknown = []
    for k, (block, proof) in enumerate(zip(earlier.blocks, earlier.found, strict=True)):
        if not certifiable(normal, block):
            continue
        if proof is None:
            known = certifiable(earlier.normal, block)  # and yet no certificate was found
        else:
            known = not isinstance(proof[1].part, Unimodular)  # these speak of the sides, too
        found[k] = proof if known else None
        unknown += [] if known else [k]
    recognition = "remembered"
    if unknown:
        blocks = [earlier.blocks[k] for k in unknown]
        proofs, recognition = _certify(normal, blocks, deadline, store)
        for k, proof in zip(unknown, proofs, strict=True):
            found[k] = proof
    if found != earlier.found:
        return _grouped(normal, earlier.blocks, found, recognition)
    return replace(
        earlier,
        normal=normal,
        findings=_findings(normal, earlier.blocks, found),
        groups=[group.within(normal) for group in earlier.groups],
        rest=[rest.within(normal) for rest in earlier.rest],
        recognition=recognition,
    )


def _certify(
    normal: NormalForm, blocks: list[Block], deadline: Deadline, store: KnownProofs | None
) -> tuple[list[Found | None], str]:
    """Certificates of blocks, and whether a store had any of them."""
    before = 0 if store is None else store.recalled
    found = certify(normal, blocks, deadline, "linear", store)
    return found, "stored" if store is not None and store.recalled > before else "found"


def _grouped(
    normal: NormalForm, blocks: list[Block], found: list[Found | None], recognition: str
) -> Prepared:
    pairs = list(zip(blocks, found, strict=True))
    uncertified = [block for block, proof in pairs if proof is None]
    room = 1 if len(uncertified) <= MOST_PROGRAMS else 0
    return Prepared(
        normal=normal,
        blocks=blocks,
        found=found,
        findings=_findings(normal, blocks, found),
        groups=groups_of(normal, [(block, proof) for block, proof in pairs if proof]),
        rest=[
            Rest(block, normal.restrict(block.rows, block.columns), deque(maxlen=room))
            for block in uncertified
        ],
        recognition=recognition,
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


class RecentMatrices:
    """Memories of matrices met lately, for forms that come one by one and share no `replace`.

    They are found by a digest; whoever uses a memory compares the matrix itself.

    Parameters
    ----------
    most : int
        Entries of all matrices together, those not met for longest being given up.

    Examples
    --------
    >>> def read():
    ...     return LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
    ...                                   col_upper=1, cost=[2, 3])
    >>> recent = RecentMatrices()
    >>> first = prepare(recent.lend(read()), Deadline(None))
    >>> first.recognition, prepare(recent.lend(read()), Deadline(None)).recognition
    ('found', 'remembered')
    """

    def __init__(self, most: int = 5_000_000) -> None:
        self.most = most
        self._memories: OrderedDict[bytes, tuple[Memory, int]] = OrderedDict()

    def lend(self, form: LinearForm) -> LinearForm:
        """Return the form with the memory of its matrix, if that was met before."""
        matrix = form.matrix
        digest = hashlib.blake2b(repr(matrix.shape).encode())
        for numbers in (matrix.indptr, matrix.indices, matrix.data):
            digest.update(numbers.tobytes())
        memory, _ = self._memories.pop(digest.digest(), (form.memory, 0))
        self._memories[digest.digest()] = memory, matrix.nnz
        while len(self._memories) > 1 and self._too_many():
            self._memories.popitem(last=False)
        return form if memory is form.memory else replace(form, memory=memory)

    def _too_many(self) -> bool:
        entries = sum(nonzeros for _, nonzeros in self._memories.values())
        return len(self._memories) > MOST_MATRICES or entries > self.most
