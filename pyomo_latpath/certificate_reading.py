"""Reading a certificate's data, with a refusal of all that is not as it must be."""

from __future__ import annotations

import re
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from .forms.numbers import Integers

#: Products below this bound are exact in 64 bits.
SAFE = 2**62


class CertificateError(ValueError):
    """A certificate that does not prove what it claims; the message says where it fails."""


def require(holds: Any, message: str) -> None:
    """Raise CertificateError with the message unless `holds`."""
    if not holds:
        raise CertificateError(message)


def read_value(data: dict[str, Any], key: str, kind: type) -> Any:
    """Return data[key], which must be of just this type."""
    value = data.get(key)
    require(type(value) is kind, f"'{key}' is missing or not of type {kind.__name__}")
    return value


def read_indices(data: dict[str, Any], key: str) -> Integers:
    """Return data[key], a list of whole numbers that fit 64 bits."""
    values = read_value(data, key, list)
    plain = all(type(value) is int and abs(value) < SAFE for value in values)
    require(plain, f"'{key}' is not a list of indices")
    return np.array(values, dtype=np.int64)


def read_pairs(data: dict[str, Any], key: str) -> Integers:
    """Return data[key], a list of pairs of whole numbers, as an array of shape (k, 2)."""
    return read_table(data, key, 2)


def read_table(data: dict[str, Any], key: str, width: int) -> Integers:
    """Return data[key], a list of lists of `width` whole numbers, as an array (k, width)."""
    lines = read_value(data, key, list)
    plain = all(isinstance(line, list) and len(line) == width for line in lines)
    require(plain, f"'{key}' is not a list of lists of {width} numbers")
    return read_indices({key: [value for line in lines for value in line]}, key).reshape(-1, width)


def require_indices(values: Integers, size: int, what: str) -> None:
    """Require indices within 0 to size - 1, none twice."""
    require(((values >= 0) & (values < size)).all(), f"{what} has an index outside 0 to {size - 1}")
    require((np.diff(np.sort(values)) > 0).all(), f"{what} has an index twice")


@dataclass(frozen=True, eq=False)
class Factors:
    """Factors of all rows or columns; num / den, or `exact` where num is 0."""

    num: Integers
    den: Integers
    exact: NDArray[Any]


def read_factors(size: int, places: Integers, texts: list[str]) -> Factors:
    """Read the factors at some places; all others are 1."""
    table = {}
    for text in dict.fromkeys(texts):
        plain = isinstance(text, str) and re.fullmatch(r"-?[0-9]+(/[0-9]*[1-9][0-9]*)?", text)
        require(plain, f"the factor {text!r} is not of the form p/q")
        table[text] = Fraction(text)
        require(table[text] != 0, "a factor is 0")
    factors = Factors(np.ones(size, np.int64), np.ones(size, np.int64), np.empty(size, object))
    factors.exact.fill(Fraction(1))
    if set(table) <= {"1"}:
        return factors
    small = {
        text: (f.numerator, f.denominator)
        if max(abs(f.numerator), f.denominator) < SAFE
        else (0, 1)
        for text, f in table.items()
    }
    factors.num[places] = [small[text][0] for text in texts]
    factors.den[places] = [small[text][1] for text in texts]
    factors.exact[places] = [table[text] for text in texts]
    return factors
