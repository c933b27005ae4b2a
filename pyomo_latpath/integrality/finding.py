"""What an assessment found: one verdict per block, with its certificate or its witness."""

from __future__ import annotations

import enum
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from ..certificates import Certificate

Indices = NDArray[np.int64]


class Verdict(str, enum.Enum):
    """What is known about the vertices of a block's LP relaxation.

    Examples
    --------
    >>> Verdict.PROVEN == "proven"
    True
    """

    PROVEN = "proven"
    SAMPLED = "sampled"
    REFUTED = "refuted"
    UNDECIDED = "undecided"

    def __str__(self) -> str:
        return self.value


#: A form's verdict is the first of these that one of its blocks has.
WORST_FIRST = (Verdict.REFUTED, Verdict.UNDECIDED, Verdict.SAMPLED, Verdict.PROVEN)


@dataclass(frozen=True, eq=False)
class Witness:
    """A fractional vertex of a block's relaxation, exact.

    Attributes
    ----------
    columns : ndarray, shape (n,), int64
        The block's columns, as indices into the form.
    values : tuple of Fraction, length n
        The vertex, in the form's own units.
    tight_rows, tight_bounds : ndarray, int64
        Rows and columns (indices into the form) whose sides and bounds define the vertex.
    """

    columns: Indices
    values: tuple[Fraction, ...]
    tight_rows: Indices
    tight_bounds: Indices

    def to_dict(self) -> dict[str, Any]:
        """Plain data; values as "p/q" strings."""
        return {
            "columns": self.columns.tolist(),
            "values": [str(value) for value in self.values],
            "tight_rows": self.tight_rows.tolist(),
            "tight_bounds": self.tight_bounds.tolist(),
        }


@dataclass(frozen=True, eq=False)
class BlockFinding:
    """The verdict on one block.

    Attributes
    ----------
    rows, columns : ndarray, int64
        Indices into the form.
    verdict : Verdict
    structure : str or None
        What a person reads: 'trivial', 'incidence', 'interval', 'network', 'conetwork',
        'sum' or 'unimodular'; None without a certificate.
    certificate : Certificate or None
        The proof, for this block alone.
    witness : Witness or None
        A fractional vertex, where one was met.
    samples : int
        Vertices looked at.
    reason : str
        One sentence.
    """

    rows: Indices
    columns: Indices
    verdict: Verdict
    structure: str | None
    certificate: Certificate | None
    witness: Witness | None
    samples: int
    reason: str

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        return {
            "rows": self.rows.tolist(),
            "columns": self.columns.tolist(),
            "verdict": self.verdict.value,
            "structure": self.structure,
            "certificate": None if self.certificate is None else self.certificate.to_dict(),
            "witness": None if self.witness is None else self.witness.to_dict(),
            "samples": self.samples,
            "reason": self.reason,
        }


@dataclass(frozen=True, eq=False)
class Finding:
    """The verdict on a form, block by block.

    Attributes
    ----------
    blocks : tuple of BlockFinding
    snapped : int
        Numbers that were read as another one nearby (0.30000000000000004 as 3/10).
    seed : int
        Seed of the vertex sampler.
    """

    blocks: tuple[BlockFinding, ...]
    snapped: int
    seed: int

    @property
    def verdict(self) -> Verdict:
        """Refuted before undecided before sampled before proven."""
        met = {block.verdict for block in self.blocks}
        return next((verdict for verdict in WORST_FIRST if verdict in met), Verdict.PROVEN)

    @property
    def samples(self) -> int:
        """Vertices looked at in the blocks whose verdict rests on them."""
        return sum(block.samples for block in self.blocks if block.verdict is Verdict.SAMPLED)

    @property
    def structures(self) -> tuple[str, ...]:
        """The structures met, each once, largest block first."""
        by_size = sorted(self.blocks, key=lambda block: -block.columns.size)
        return tuple(dict.fromkeys(b.structure for b in by_size if b.structure is not None))

    @property
    def certificate(self) -> Certificate | None:
        """The proof of the whole form; None unless each block has one."""
        parts = [block.certificate for block in self.blocks]
        if not parts or any(part is None for part in parts):
            return None
        proofs = [part for part in parts if part is not None]
        together = tuple(block for part in proofs for block in part.blocks)
        return Certificate(proofs[0].fingerprint, together, complete=True)

    def to_dict(self) -> dict[str, Any]:
        """Plain data, ready for JSON."""
        return {
            "verdict": self.verdict.value,
            "structures": list(self.structures),
            "snapped": self.snapped,
            "seed": self.seed,
            "blocks": [block.to_dict() for block in self.blocks],
        }
