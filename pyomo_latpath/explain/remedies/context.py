"""What is known of a model when remedies are looked for: the input of `find_remedies`."""

from __future__ import annotations

from dataclasses import dataclass

from ...forms.blocks import Block
from ...forms.linear_form import LinearForm
from ...forms.normalise import NormalForm
from ...highs import Basis, LpResult
from ...integrality.finding import Finding
from ..explanation import Fractional, Gap, Group, NamedViolator


@dataclass(frozen=True, eq=False)
class Context:
    """Everything found before the remedies.

    Attributes
    ----------
    form : LinearForm
    normal : NormalForm
    blocks : tuple of Block
        Of the normalised form.
    finding : Finding
    groups : tuple of Group
    optimum : LpResult or None
        Of the whole normalised relaxation, in scaled units and minimised; None where it has no
        optimum, or where the time did not allow it.
    basis : Basis or None
        The optimal one.
    fractional : Fractional or None
    gap : Gap or None
    violators : tuple of NamedViolator
    seed : int
    """

    form: LinearForm
    normal: NormalForm
    blocks: tuple[Block, ...]
    finding: Finding
    groups: tuple[Group, ...]
    optimum: LpResult | None
    basis: Basis | None
    fractional: Fractional | None
    gap: Gap | None
    violators: tuple[NamedViolator, ...]
    seed: int
