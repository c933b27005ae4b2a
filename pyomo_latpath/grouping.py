"""Certified blocks that are solved together: unions of those with one kind of certificate.

A union of unimodular blocks is one itself, and the networks behind several blocks, glued at a node,
are one network; so thousands of small blocks cost one call of an engine.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from .certificates import BlockCertificate, Conetwork, Network
from .forms.blocks import Block
from .forms.normalise import NormalForm
from .forms.numbers import Integers
from .paths.conetwork_flow import ConetworkStructure
from .paths.network_oracle import NetworkStructure, glued
from .paths.path_solver import LastWalk

#: A block with its structure's name and its proof.
Proven = tuple[Block, tuple[str, BlockCertificate]]


@dataclass(frozen=True, eq=False)
class Group:
    """Blocks to be solved together.

    Attributes
    ----------
    members : list of int
        Places in the list of proven blocks.
    rows, columns : ndarray, int64
        Of their union, as indices into the normal form.
    piece : NormalForm
        Their union.
    structure : NetworkStructure, ConetworkStructure or None
        The network behind it, or behind its transpose.
    last_walk : deque, at most one LastWalk
        Where the last walk over it ended; taken out while another one goes on from there.
    """

    members: list[int]
    rows: Integers
    columns: Integers
    piece: NormalForm
    structure: NetworkStructure | ConetworkStructure | None
    last_walk: deque[LastWalk] = field(default_factory=lambda: deque(maxlen=1))

    def within(self, normal: NormalForm) -> Group:
        """Return the same group of another normal form with the same scaled matrix."""
        piece = normal.restrict(self.rows, self.columns, self.piece.matrix)
        return replace(self, piece=piece)


def groups_of(normal: NormalForm, proven: Sequence[Proven]) -> list[Group]:
    """Group certified blocks by the kind of their certificate.

    Parameters
    ----------
    normal : NormalForm
    proven : sequence of (Block, (str, BlockCertificate))
    """
    groups = []
    for members in _kinds(proven):
        blocks = [proven[k][0] for k in members]
        rows = np.sort(np.concatenate([block.rows for block in blocks]))
        columns = np.sort(np.concatenate([block.columns for block in blocks]))
        piece = normal.restrict(rows, columns)
        structure = _structure(normal, piece, [proven[k] for k in members])
        groups.append(Group(members, rows, columns, piece, structure))
    return groups


def _kinds(proven: Sequence[Proven]) -> list[list[int]]:
    """Blocks by the kind of their certificate, trivial ones last."""
    groups: list[list[int]] = [[], [], [], []]
    networks, conetworks, unimodular, trivial = groups
    for k, (_, (structure, certificate)) in enumerate(proven):
        if isinstance(certificate.part, Network):
            networks.append(k)
        elif isinstance(certificate.part, Conetwork):
            conetworks.append(k)
        else:
            (trivial if structure == "trivial" else unimodular).append(k)
    return [group for group in groups if group]


def _structure(
    normal: NormalForm, piece: NormalForm, proven: list[Proven]
) -> NetworkStructure | ConetworkStructure | None:
    """The network behind a group of blocks or their transposes, where there is one."""
    kind = type(proven[0][1][1].part)
    parts = []
    for block, (_, certificate) in proven:
        part = certificate.part
        if not isinstance(part, Network | Conetwork):
            return None
        places = [
            np.searchsorted(piece.rows, normal.rows[block.rows]),
            np.searchsorted(piece.columns, normal.columns[block.columns]),
        ]
        of_tree, of_arcs = places if kind is Network else places[::-1]
        parts.append((of_tree, of_arcs, part.tree, part.arcs))
    if kind is Network:
        return glued(parts, piece.rows.size, piece.columns.size)
    return ConetworkStructure(glued(parts, piece.columns.size, piece.rows.size))
