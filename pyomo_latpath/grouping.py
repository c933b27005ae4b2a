"""Certified blocks that are solved together: unions of those with one kind of certificate.

A union of unimodular blocks is one itself, and the networks behind several blocks, glued at a node,
are one network; so thousands of small blocks cost one call of an engine.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .certificates import BlockCertificate, Conetwork, Network
from .forms.blocks import Block
from .forms.normalise import NormalForm
from .paths.conetwork_flow import ConetworkStructure
from .paths.network_oracle import NetworkStructure, glued

#: A block with its structure's name and its proof.
Proven = tuple[Block, tuple[str, BlockCertificate]]


@dataclass(frozen=True, eq=False)
class Group:
    """Blocks to be solved together.

    Attributes
    ----------
    members : list of int
        Places in the list of proven blocks.
    piece : NormalForm
        Their union.
    structure : NetworkStructure, ConetworkStructure or None
        The network behind it, or behind its transpose.
    """

    members: list[int]
    piece: NormalForm
    structure: NetworkStructure | ConetworkStructure | None


def groups_of(normal: NormalForm, proven: list[Proven]) -> list[Group]:
    """Group certified blocks by the kind of their certificate.

    Parameters
    ----------
    normal : NormalForm
    proven : list of (Block, (str, BlockCertificate))
    """
    groups = []
    for members in _kinds(proven):
        piece = _union(normal, [proven[k][0] for k in members])
        structure = _structure(normal, piece, [proven[k] for k in members])
        groups.append(Group(members, piece, structure))
    return groups


def _kinds(proven: list[Proven]) -> list[list[int]]:
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


def _union(normal: NormalForm, blocks: list[Block]) -> NormalForm:
    rows = np.sort(np.concatenate([block.rows for block in blocks]))
    columns = np.sort(np.concatenate([block.columns for block in blocks]))
    return normal.restrict(rows, columns)


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
