"""The exact check of an answer: whole numbers in, whole-number arithmetic, a yes or a no.

An optimum is proven by a plan and prices that are feasible and complementary (strong
duality), or by weak duality where the plan lies less than one unit of the objective above
the bound of the prices. Floats from a solver are only ever guesses at those whole numbers.
Schrijver (1986), Theory of Linear and Integer Programming, section 7.4.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
import scipy.sparse as sp
from numpy.typing import NDArray

from .forms.normalise import NormalForm
from .forms.numbers import EXACT, common_scale, nearby_fraction, whole_numbers

Floats = NDArray[np.float64]
Whole = NDArray[Any]
Flags = NDArray[np.bool_]
#: Prices of a basis: takes whole costs (n,) and a first guess (m,), returns whole prices (m,).
BasisPrices = Callable[[Whole, Whole], Whole]

#: Whole prices are sought as multiples of one over at most this number.
LARGEST_DENOMINATOR = 10**6


@dataclass(frozen=True, eq=False)
class WholeCosts:
    """Costs as whole numbers over one denominator: cost = numerators / denominator."""

    numerators: Whole
    denominator: int


@dataclass(frozen=True, eq=False)
class Proof:
    """What the exact check found.

    Attributes
    ----------
    exact : bool
        Whether the claim holds in exact arithmetic.
    row_dual : ndarray, shape (m,), float64
        Exact prices (scaled units, minimisation); those given where it failed, or where only
        the gap to them was closed.
    reduced_cost : ndarray, shape (n,), float64
    reason : str
        Why the check failed; empty where it did not.
    """

    exact: bool
    row_dual: Floats
    reduced_cost: Floats
    reason: str = ""


def whole_costs(normal: NormalForm) -> WholeCosts:
    """Read the costs of a form (scaled units, minimisation) as whole numbers.

    Examples
    --------
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> form = LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
    ...                               col_upper=1, cost=[0.25, 3])
    >>> costs = whole_costs(normalise(form))
    >>> costs.numerators, costs.denominator
    (array([ 1, 12]), 4)
    """
    sign = 1 if normal.form.sense == "min" else -1
    numerators, denominator = whole_numbers(normal.form.cost[normal.columns])
    numerators = sign * numerators
    if (normal.col_num != 1).any() or (normal.col_den != 1).any():
        common = math.lcm(*np.unique(normal.col_den).tolist())
        factor = normal.col_num.astype(object) * (common // normal.col_den.astype(object))
        numerators, denominator = numerators.astype(object) * factor, denominator * common
    if denominator == 1:
        return WholeCosts(numerators, 1)
    divisor = math.gcd(denominator, int(np.gcd.reduce(numerators)))
    return WholeCosts(numerators // divisor, denominator // divisor)


def plan_holds(normal: NormalForm, x: Floats) -> bool:
    """Check in exact arithmetic that a plan (scaled units) satisfies every row and bound.

    Integer columns must hold whole numbers; continuous ones are read as simple fractions.
    """
    return _standing(normal, x) is not None


def prove_optimal(
    normal: NormalForm,
    costs: WholeCosts,
    x: Floats,
    row_dual: Floats,
    basis_prices: BasisPrices | None = None,
) -> Proof:
    """Check that no plan is cheaper than `x`.

    Parameters
    ----------
    normal : NormalForm
    costs : WholeCosts
        Of `normal`.
    x : ndarray, shape (n,), float64
        The plan, in scaled units.
    row_dual : ndarray, shape (m,), float64
        A guess at the prices, in scaled units, minimisation.
    basis_prices : callable, optional
        Sharpens a guess to the exact prices of the basis behind it.

    Returns
    -------
    Proof
    """
    standing = _standing(normal, x)
    if standing is None:
        return _failed(normal, row_dual, "the plan does not satisfy every row exactly")
    tried = []
    for prices, multiple in _price_guesses(costs, row_dual, basis_prices):
        reduced = costs.numerators * multiple - exact_product(normal.matrix.T, prices)
        if standing.rows.complements(prices) and standing.columns.complements(reduced):
            unit = costs.denominator * multiple
            return Proof(True, _quotient(prices, unit), _quotient(reduced, unit))
        tried.append((prices, reduced, multiple))
    for prices, reduced, multiple in tried:
        if _gap_closed(normal, costs, standing, prices, reduced, multiple):
            return Proof(True, row_dual, normal.cost - normal.matrix.T @ row_dual)
    return _failed(normal, row_dual, "no exact prices were found that prove the plan optimal")


def prove_infeasible(normal: NormalForm, farkas: Floats | None) -> bool:
    """Check that row multipliers ask for more than any point within bounds can give."""
    return shortfall(normal, farkas) is not None


def shortfall(normal: NormalForm, farkas: Floats | None) -> Fraction | None:
    """By how much rows ask for more than any point within bounds can give.

    Farkas' lemma, Schrijver (1986), section 7.3: no x satisfies the rows if, for some y, the
    largest y A x over the bounds lies below what the sides of the rows with y != 0 ask.

    Parameters
    ----------
    normal : NormalForm
    farkas : ndarray, shape (m,), float64, or None
        A guess at y, up to sign and scale. On a network y is a cut, 1 on the rows of one side.

    Returns
    -------
    Fraction or None
        In units of the smallest multiplier; None where the multipliers prove nothing.

    Examples
    --------
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> from pyomo_latpath.forms.normalise import normalise
    >>> form = LinearForm.from_arrays([[1, 1]], row_lower=5, row_upper=9, col_lower=0,
    ...                               col_upper=1, cost=0)
    >>> shortfall(normalise(form), np.array([1.0]))
    Fraction(3, 1)
    """
    if farkas is None or not normal.whole_rows.all():
        return None
    sides = _finite_as_whole(normal.row_lower, normal.row_upper)
    bounds = _finite_as_whole(normal.col_lower, normal.col_upper)
    for multipliers in _whole_directions(farkas):
        for y in (multipliers, -multipliers):
            asked = _support(-y, sides)
            given = _support(exact_product(normal.matrix.T, y), bounds)
            if asked is not None and given is not None and given < -asked:
                return (-asked - given) / min(abs(int(v)) for v in y.tolist() if v)
    return None


def prove_unbounded(normal: NormalForm, costs: WholeCosts, ray: Floats | None) -> bool:
    """Check that a direction stays feasible for ever and improves the objective.

    Together with one feasible plan this proves the model unbounded.
    """
    if ray is None or not normal.whole_rows.all():
        return False
    for direction in _whole_directions(ray):
        moves = exact_product(normal.matrix, direction)
        stays = all(
            not ((np.isfinite(low) & (move < 0)) | (np.isfinite(high) & (move > 0))).any()
            for move, low, high in (
                (moves, normal.row_lower, normal.row_upper),
                (direction, normal.col_lower, normal.col_upper),
            )
        )
        if stays and _dot(costs.numerators, direction) < 0:
            return True
    return False


def exact_product(matrix: sp.sparray, vector: Whole) -> Whole:
    """Multiply a matrix of whole floats with a vector of whole numbers, exactly.

    Parameters
    ----------
    matrix : scipy.sparse array, shape (m, n), float64
        Entries are whole numbers below 2**53.
    vector : ndarray, shape (n,), int64 or object (Python integers)

    Returns
    -------
    ndarray, shape (m,), int64 or object
        Object where 64 bits might not hold the sums.

    Examples
    --------
    >>> exact_product(sp.csc_array([[1.0, -2.0]]), np.array([2**80, 1], dtype=object))
    array([1208925819614629174706174], dtype=object)
    """
    size = float(np.abs(vector).max(initial=0))
    entry = max(matrix.data.max(initial=0.0), -matrix.data.min(initial=0.0))
    reach = entry * size * max(matrix.shape[1], 1)
    if vector.dtype != object or size < EXACT:
        if reach < EXACT:
            return (matrix @ vector.astype(np.float64)).astype(np.int64)
        row_reach = (abs(matrix) @ np.abs(vector).astype(np.float64)).max(initial=0.0)
        if row_reach < EXACT:
            return (matrix @ vector.astype(np.float64)).astype(np.int64)
    by_row = sp.csr_array(matrix)
    total = np.zeros(by_row.shape[0], dtype=object)
    full = np.flatnonzero(np.diff(by_row.indptr) > 0)
    if full.size:
        entries = by_row.data.astype(np.int64).astype(object)
        terms = entries * vector.astype(object)[by_row.indices]
        total[full] = np.add.reduceat(terms, by_row.indptr[full])
    return total


def exact_objective(costs: WholeCosts, x: Floats) -> Fraction | None:
    """Objective of a plan (scaled units, minimisation), exact; None without simple values."""
    plan, scale = _plan(x)
    if plan is None:
        return None
    return Fraction(_dot(costs.numerators, plan), costs.denominator * scale)


def _failed(normal: NormalForm, row_dual: Floats, reason: str) -> Proof:
    return Proof(False, row_dual, normal.cost - normal.matrix.T @ row_dual, reason)


@dataclass(frozen=True, eq=False)
class _Held:
    """Where values lie between their limits, in exact arithmetic."""

    inside: Flags
    at_low: Flags
    at_high: Flags

    @classmethod
    def between(
        cls, values: Whole, scale: int, lower: Floats, upper: Floats, whole: Flags
    ) -> _Held:
        """Hold values / scale against limits, of which those flagged are whole or infinite."""
        if scale == 1 and values.dtype != object and whole.all():
            exact = values.astype(np.float64)  # they lie below 2**53
            return cls((exact >= lower) & (exact <= upper), exact == lower, exact == upper)
        limits = _finite_as_whole(lower, upper)
        value = _product(values, limits.scale)
        low, high = _product(limits.low, scale), _product(limits.high, scale)
        return cls(
            (limits.no_low | (value >= low)) & (limits.no_high | (value <= high)),
            ~limits.no_low & (value == low),
            ~limits.no_high & (value == high),
        )

    def complements(self, prices: Whole) -> bool:
        """Strong duality: a price is positive only at a lower limit, negative only at an upper."""
        odd = ((prices > 0) & ~self.at_low) | ((prices < 0) & ~self.at_high)
        return not odd.any()


@dataclass(frozen=True, eq=False)
class _Standing:
    """A plan as whole numbers over one denominator, and where it stands; it satisfies all."""

    plan: Whole
    scale: int
    rows: _Held
    columns: _Held


def _standing(normal: NormalForm, x: Floats) -> _Standing | None:
    plan, scale = _plan(x)
    if plan is None or not normal.whole_rows.all() or (normal.integer & (np.rint(x) != x)).any():
        return None
    activity = exact_product(normal.matrix, plan)
    sides = normal.row_lower, normal.row_upper, normal.whole_sides
    bounds = normal.col_lower, normal.col_upper, normal.whole_bounds
    rows = _Held.between(activity, scale, *sides)
    columns = _Held.between(plan, scale, *bounds)
    holds = rows.inside.all() and columns.inside.all()
    return _Standing(plan, scale, rows, columns) if holds else None


def _plan(x: Floats) -> tuple[Whole | None, int]:
    """A plan as whole numbers over one small denominator, or None."""
    whole = np.rint(x)
    if not np.isfinite(x).all() or np.abs(whole).max(initial=0.0) >= EXACT:
        return None, 1
    odd = np.flatnonzero(whole != x)
    if not odd.size:
        return whole.astype(np.int64), 1
    near = [nearby_fraction(float(v), 1e-9 * max(1.0, abs(float(v)))) for v in x[odd]]
    scale = common_scale(near)
    if scale > 10**9:
        return None, 1
    plan = whole.astype(np.int64).astype(object) * scale
    plan[odd] = [int(fraction * scale) for fraction in near]
    return plan, scale


def _price_guesses(
    costs: WholeCosts, row_dual: Floats, basis_prices: BasisPrices | None
) -> Iterator[tuple[Whole, int]]:
    """Candidates for whole prices and the multiple that they are of the costs' unit."""
    scaled = row_dual * float(costs.denominator)
    if np.isfinite(scaled).all():
        yield _rounded(scaled), 1
        if basis_prices is not None:
            yield basis_prices(costs.numerators, _rounded(scaled)), 1
            return
        near = [nearby_fraction(v, 1e-7 * max(1.0, abs(v))) for v in np.unique(scaled).tolist()]
        multiple = common_scale(near)
        if 1 < multiple <= LARGEST_DENOMINATOR:
            yield _rounded(scaled * multiple), multiple


def _rounded(values: Floats) -> Whole:
    if np.abs(values).max(initial=0.0) < 2.0**62:
        return np.rint(values).astype(np.int64)
    return np.array([round(value) for value in values.tolist()], dtype=object)


def _quotient(values: Whole, divisor: int) -> Floats:
    """Correctly rounded where both parts are exact floats."""
    if values.dtype == object or divisor >= EXACT:
        return np.array([value / divisor for value in values.tolist()], dtype=np.float64)
    return values / float(divisor)


def _gap_closed(
    normal: NormalForm,
    costs: WholeCosts,
    standing: _Standing,
    prices: Whole,
    reduced: Whole,
    multiple: int,
) -> bool:
    """Weak duality: the plan lies less than one unit of the objective above the bound."""
    if (~normal.integer & (costs.numerators != 0)).any():
        return False
    unit = math.gcd(*np.unique(costs.numerators).tolist())
    rows = _support(-prices, _finite_as_whole(normal.row_lower, normal.row_upper))
    columns = _support(-reduced, _finite_as_whole(normal.col_lower, normal.col_upper))
    if rows is None or columns is None:
        return False
    value = Fraction(_dot(costs.numerators, standing.plan), standing.scale)
    return value + Fraction(rows + columns) / multiple < unit


@dataclass(frozen=True, eq=False)
class _Limits:
    """Lower and upper limits as whole numbers over one denominator, with flags for infinite."""

    low: Whole
    high: Whole
    no_low: Flags
    no_high: Flags
    scale: int


def _finite_as_whole(lower: Floats, upper: Floats) -> _Limits:
    no_low, no_high = ~np.isfinite(lower), ~np.isfinite(upper)
    both = np.concatenate([np.where(no_low, 0.0, lower), np.where(no_high, 0.0, upper)])
    whole, scale = whole_numbers(both)
    return _Limits(whole[: lower.size], whole[lower.size :], no_low, no_high, scale)


def _support(direction: Whole, limits: _Limits) -> Fraction | None:
    """Largest direction . v over the box of v; None where it is infinite."""
    up, down = direction > 0, direction < 0
    if (up & limits.no_high).any() or (down & limits.no_low).any():
        return None
    best = np.where(up, limits.high, np.where(down, limits.low, 0))
    return Fraction(_dot(direction, best), limits.scale)


def _product(values: Whole, factor: int) -> Whole:
    if factor == 1:
        return values
    size = max((abs(int(values.max())), abs(int(values.min())))) if values.size else 0
    if values.dtype != object and size * abs(factor) < 2**62:
        return values * factor
    return values.astype(object) * factor


def _dot(left: Whole, right: Whole) -> int:
    """Exact inner product."""
    used = np.flatnonzero((left != 0) & (right != 0))
    left, right = left[used], right[used]
    if left.dtype != object and right.dtype != object:
        reach = float(np.abs(left).astype(np.float64) @ np.abs(right).astype(np.float64))
        if reach < 2.0**62:
            return int(left @ right)
    return sum(a * b for a, b in zip(left.tolist(), right.tolist(), strict=True))


def _whole_directions(direction: Floats) -> Iterator[Whole]:
    """Whole multiples of a float direction: in units of its smallest entry, then as fractions."""
    size = np.abs(direction).max(initial=0.0)
    if not np.isfinite(size) or size == 0:
        return
    clean = np.where(np.abs(direction) < 1e-9 * size, 0.0, direction)
    smallest = np.abs(clean[clean != 0]).min()
    yield _rounded(clean / smallest)
    distinct, back = np.unique(clean / size, return_inverse=True)
    near = [nearby_fraction(value, 1e-9) for value in distinct.tolist()]
    scale = common_scale(near)
    if scale < 10**15:
        whole = np.array([int(fraction * scale) for fraction in near], dtype=object)
        yield whole[back]
