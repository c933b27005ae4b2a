"""What is left of a model without some of its rows, and whether that is certified whole.

A form whose dropped rows have no sides any more keeps its numbering, and normalisation passes
over such rows. Blocks met before, with the same rows, are not looked at again.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ..certificates import BlockCertificate
from ..deadline import Deadline
from ..forms.blocks import Block, blocks_of
from ..forms.linear_form import Flags, LinearForm
from ..forms.normalise import NormalForm, normalise
from ..integrality.certify import certify
from ..integrality.regular.clock import OutOfTime
from ..integrality.regular.signs import odd_hole

Proof = tuple[str, BlockCertificate]

#: Nonzeros up to which any block is looked at by all means, and seconds for that.
SMALL, SECONDS = 2000, 0.5


@dataclass(frozen=True, eq=False)
class Certified:
    """A certified rest of a model.

    Attributes
    ----------
    normal : NormalForm
    blocks : tuple of Block
    proofs : tuple of (str, BlockCertificate)
        Structure and proof of each block.
    """

    normal: NormalForm
    blocks: tuple[Block, ...]
    proofs: tuple[Proof, ...]

    @property
    def structures(self) -> tuple[str, ...]:
        """The structures met, each once, largest block first; 'trivial' beside no other."""
        pairs = zip(self.proofs, self.blocks, strict=True)
        by_size = sorted(pairs, key=lambda pair: -pair[1].columns.size)
        met = tuple(dict.fromkeys(proof[0] for proof, _ in by_size))
        return tuple(name for name in met if name != "trivial") or met


class Remains:
    """Answers whether the rest of one form is certified, for one set of kept rows after another.

    Parameters
    ----------
    form : LinearForm

    Examples
    --------
    >>> triangle = LinearForm.from_arrays([[1, 1, 0], [0, 1, 1], [1, 0, 1]], row_lower=0,
    ...                                   row_upper=1, col_lower=0, col_upper=1, cost=0)
    >>> remains = Remains(triangle)
    >>> remains.certified(np.array([True, True, True]), Deadline(None)) is None
    True
    >>> remains.certified(np.array([True, True, False]), Deadline(None)).structures
    ('incidence',)
    """

    def __init__(self, form: LinearForm) -> None:
        self.form = form
        self._known: dict[bytes, Proof | None] = {}

    def without(self, kept: Flags) -> LinearForm:
        """Return the form whose other rows have no sides."""
        form = self.form
        return form.replace(
            row_lower=np.where(kept, form.row_lower, -np.inf),
            row_upper=np.where(kept, form.row_upper, np.inf),
        )

    def certified(self, kept: Flags, deadline: Deadline) -> Certified | None:
        """Certify what is left, all of it.

        Parameters
        ----------
        kept : ndarray, shape (m,), bool
            Rows of the form.
        deadline : Deadline

        Returns
        -------
        Certified or None
            None where one block at least has no certificate, and where the time ran out.
        """
        normal = normalise(self.without(kept))
        if normal.conflict is not None:
            return None
        blocks = blocks_of(normal)
        keys = [normal.rows[block.rows].tobytes() for block in blocks]
        if any(key in self._known and self._known[key] is None for key in keys):
            return None
        new = [k for k, key in enumerate(keys) if key not in self._known]
        for key, proof in zip(
            (keys[k] for k in new),
            self._certify(normal, [blocks[k] for k in new], deadline),
            strict=True,
        ):
            if proof is not None or not deadline.passed:
                self._known[key] = proof
        proofs = [self._known.get(key) for key in keys]
        told = tuple(proof for proof in proofs if proof is not None)
        return Certified(normal, tuple(blocks), told) if len(told) == len(blocks) else None

    def _certify(
        self, normal: NormalForm, blocks: Sequence[Block], deadline: Deadline
    ) -> list[Proof | None]:
        """Certify by structure; what is left as a sum of such, or as a system of equations."""
        proofs = certify(normal, blocks, deadline, "linear")
        for k, block in enumerate(blocks):
            if proofs[k] is None and _worth_more(normal, block, deadline.within(SECONDS)):
                more = certify(normal, [block], deadline.within(SECONDS), "systems")
                proofs[k] = more[0]
        return proofs


def _worth_more(normal: NormalForm, block: Block, deadline: Deadline) -> bool:
    """Whether a block is small, has large entries, or signs that do not contradict each other.

    A contradiction of signs, soon found, leaves nothing but a system of equations, and of those
    with entries +-1 hardly any are whole in spite of it.
    """
    matrix = normal.matrix[:, block.columns]
    if matrix.nnz <= SMALL or (np.abs(matrix.data) != 1).any():
        return True
    try:
        return odd_hole(matrix.astype(np.int64), deadline) is None
    except OutOfTime:
        return False
