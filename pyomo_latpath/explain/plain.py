"""Dataclasses as plain data, ready for JSON."""

from __future__ import annotations

import enum
import math
from dataclasses import fields, is_dataclass
from fractions import Fraction
from typing import Any

import numpy as np


def plain(value: Any) -> Any:
    """Return a value as numbers, texts, lists and dicts.

    Fields of dataclasses that `repr` leaves out (forms, models, index arrays) are left out here,
    too. Fractions become "p/q" strings; what is no finite number becomes None.

    Examples
    --------
    >>> plain((Fraction(1, 2), float("nan"), np.arange(2), {"a": 1.5}))
    ['1/2', None, [0, 1], {'a': 1.5}]
    """
    if isinstance(value, enum.Enum):
        return value.value
    if isinstance(value, Fraction):
        return str(value)
    if isinstance(value, np.ndarray | np.generic):
        return plain(value.tolist())
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if is_dataclass(value):
        told = {each.name: getattr(value, each.name) for each in fields(value) if each.repr}
        return plain(told)
    if isinstance(value, dict):
        return {key: plain(inner) for key, inner in value.items()}
    if isinstance(value, list | tuple):
        return [plain(inner) for inner in value]
    return value
