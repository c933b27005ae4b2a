"""Reading floats as the rationals they were meant to be: 0.1 is 1/10, 0.1 + 0.2 is 3/10."""

from __future__ import annotations

import math
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from .linear_form import Floats

Integers = NDArray[np.int64]

#: Largest whole number that a float64 holds exactly together with all smaller ones.
EXACT = 2.0**53
#: How near (relative) a scaled side or bound must be to a whole number to be read as it.
SNAP = 1e-9
#: Distinct values read one by one at most; what is beyond stays unread.
MOST_READ_SINGLY = 20_000
#: The same where all values must share one denominator, which many odd ones never do.
MOST_ODD_COSTS = 50


def reading_tolerance(values: Floats) -> Floats:
    """How far the number meant may lie from each float.

    A few units in the last place come from arithmetic on the way in; 1e-12 allows for data
    that were written with twelve digits. Relative below 1, so that 1e-13 is not read as 0.

    Parameters
    ----------
    values : ndarray, float64

    Returns
    -------
    ndarray, float64
    """
    size = np.abs(values)
    return np.maximum(1e-12 * np.minimum(1.0, size), 4 * np.spacing(size))


def simplest_fraction(value: float) -> Fraction:
    """Return the rational with the smallest denominator within reading tolerance of `value`.

    Parameters
    ----------
    value : float
        Finite.

    Examples
    --------
    >>> simplest_fraction(0.1 + 0.2)
    Fraction(3, 10)
    >>> simplest_fraction(-1 / 3)
    Fraction(-1, 3)
    """
    if value == int(value):
        return Fraction(int(value))
    return nearby_fraction(value, float(reading_tolerance(np.array(value))))


def nearby_fraction(value: float, tolerance: float) -> Fraction:
    """Return the rational with the smallest denominator within `tolerance` of `value`.

    Found on the Stern-Brocot tree, by the continued fraction that both ends of the interval
    share.

    Examples
    --------
    >>> nearby_fraction(0.49999999, 1e-6)
    Fraction(1, 2)
    """
    if abs(value) <= tolerance:
        return Fraction(0)
    top, bottom = abs(value).as_integer_ratio()
    slack, unit = tolerance.as_integer_ratio()
    low, high = top * unit - slack * bottom, top * unit + slack * bottom
    low_den = high_den = bottom * unit
    whole = []
    while True:
        floor = low // low_den
        if floor * low_den == low or (floor + 1) * high_den <= high:
            found, found_den = (floor if floor * low_den == low else floor + 1), 1
            break
        whole.append(floor)
        low, low_den, high, high_den = (
            high_den,
            high - floor * high_den,
            low_den,
            low - floor * low_den,
        )
    for floor in reversed(whole):
        found, found_den = floor * found + found_den, found
    return Fraction(-found if value < 0 else found, found_den)


def read_fractions(
    values: Floats, most_odd: int = MOST_READ_SINGLY
) -> tuple[Integers, Integers, NDArray[np.bool_]]:
    """Read an array of floats as fractions.

    Parameters
    ----------
    values : ndarray, float64
        Finite.
    most_odd : int
        So many distinct values with more than a few decimal places are looked at.

    Returns
    -------
    numerators, denominators : ndarray, int64
        In lowest terms; denominators are positive.
    read : ndarray, bool
        False where the number has no reading with both parts below 2**53 (the fraction is
        then 0/1), or where there were too many distinct odd values to look at each.

    Examples
    --------
    >>> read_fractions(np.array([0.25, 3.0]))
    (array([1, 3]), array([4, 1]), array([ True,  True]))
    """
    whole = np.rint(values)
    if np.array_equal(whole, values) and (not values.size or np.abs(values).max() < EXACT):
        return whole.astype(np.int64), np.ones(values.shape, np.int64), np.full(values.shape, True)
    distinct, back = np.unique(values, return_inverse=True)
    back = back.reshape(values.shape)
    num, den, read = _read_decimals(distinct)
    odd = np.flatnonzero(~read)
    if odd.size <= most_odd:
        for k in odd:
            fraction = simplest_fraction(float(distinct[k]))
            if abs(fraction.numerator) < EXACT and fraction.denominator < EXACT:
                num[k], den[k], read[k] = fraction.numerator, fraction.denominator, True
    return num[back], den[back], read[back]


def _read_decimals(values: Floats) -> tuple[Integers, Integers, NDArray[np.bool_]]:
    """Read values that have a few decimal places, all at once.

    Two fractions p/q and p'/q' with q' < q differ by more than 1/q**2, so a decimal within
    tolerance whose reduced q has 2 * tolerance * q**2 < 1 is the simplest one there is.
    """
    tolerance = reading_tolerance(values)
    num, den = np.zeros(values.shape, np.int64), np.ones(values.shape, np.int64)
    read = np.zeros(values.shape, np.bool_)
    for places in range(6):
        scale = 10.0**places
        candidate = np.rint(values * scale)
        near = ~read & (np.abs(values * scale) < EXACT)
        near &= np.abs(values - candidate / scale) <= tolerance
        near &= (2 * tolerance * scale**2 < 1) | (candidate == values)
        if near.any():
            top = candidate[near].astype(np.int64)
            common = np.gcd(top, np.int64(scale))
            num[near], den[near] = top // common, np.int64(scale) // common
            read |= near
    return num, den, read


def snap(values: Floats) -> Floats:
    """Return the values, those within 1e-9 (relative) of a whole number replaced by it.

    Examples
    --------
    >>> snap(np.array([2.9999999999, 2.5, np.inf]))
    array([3. , 2.5, inf])
    """
    whole = np.rint(values)
    with np.errstate(invalid="ignore"):
        near = np.abs(values - whole) <= SNAP * np.maximum(1.0, np.abs(values))
    return np.where(near, whole, values)


def common_scale(fractions: list[Fraction]) -> int:
    """Return the least whole number that makes all fractions whole.

    Examples
    --------
    >>> common_scale([Fraction(1, 4), Fraction(5, 6)])
    12
    """
    return math.lcm(*(fraction.denominator for fraction in fractions)) if fractions else 1


def whole_numbers(values: Floats) -> tuple[NDArray[Any], int]:
    """Write values as whole numbers over one common denominator.

    Simple readings are used where their common denominator stays small; otherwise each float
    is taken for exactly what it is, a whole number times a power of two.

    Parameters
    ----------
    values : ndarray, shape (n,), float64
        Finite.

    Returns
    -------
    numerators : ndarray, shape (n,), int64 or object (Python integers)
        Object where 64 bits might not hold sums of them.
    denominator : int

    Examples
    --------
    >>> whole_numbers(np.array([0.5, 2.25]))
    (array([2, 9]), 4)
    """
    whole = np.rint(values)
    if np.array_equal(whole, values) and np.abs(values).max(initial=0.0) < EXACT:
        return whole.astype(np.int64), 1
    decimals = _shared_decimals(values)
    if decimals is not None:
        return decimals
    num, den, read = read_fractions(values, most_odd=MOST_ODD_COSTS)
    if read.all():
        common = math.lcm(*np.unique(den).tolist())
        if common <= 10**12:
            size = float(np.abs(values).max(initial=0.0)) * common
            if size < EXACT:
                return num * (common // den), common
            top = num.astype(object) * (common // den.astype(object))
            return top, common
    mantissa, exponent = np.frexp(values)
    whole = np.ldexp(mantissa, 53).astype(np.int64).astype(object)
    exponent = np.where(values == 0, 0, exponent.astype(np.int64) - 53)
    lowest = min(int(exponent.min(initial=0)), 0)
    return whole * 2 ** (exponent - lowest).astype(object), 2**-lowest


def _shared_decimals(values: Floats) -> tuple[Integers, int] | None:
    """Read values that all have a few decimal places, as `read_fractions` would, but at once."""
    tolerance = reading_tolerance(values)
    for places in range(1, 6):
        scale = 10.0**places
        candidate = np.rint(values * scale)
        if (np.abs(values - candidate / scale) <= tolerance).all():
            sure = 2 * tolerance.max(initial=0.0) * scale**2 < 1
            if not sure or np.abs(candidate).max(initial=0.0) >= EXACT:
                return None
            top = candidate.astype(np.int64)
            shared = int(np.gcd.reduce(top, initial=10**places))
            return top // shared, 10**places // shared
    return None
