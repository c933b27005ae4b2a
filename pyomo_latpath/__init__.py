"""A Pyomo solver that knows when a whole-number model is a linear program.

Importing the package registers the solver `latpath` with Pyomo:

>>> import pyomo.environ as pyo
>>> import pyomo_latpath as latpath
>>> solver = pyo.SolverFactory("latpath")

The functions below take a Pyomo model or a `LinearForm`; `totally_unimodular` takes a matrix.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import Any

from . import plugin
from .batch.family import Family
from .batch.record import BatchRecord
from .batch.runner import solve_many
from .certificates import Certificate, CertificateError
from .certificates import check_certificate as _check_certificate
from .explain.explain import explain as _explain_form
from .explain.explanation import Explanation
from .explain.remedies.remedy import Remedy
from .forms.from_file import read
from .forms.from_pyomo import compile_model
from .forms.linear_form import LinearForm
from .integrality.assess import assess as _assess_form
from .integrality.finding import BlockFinding, Finding, Verdict, Witness
from .integrality.regular.decision import TuDecision, totally_unimodular
from .solution import Move, RouteReport, Solution, WalkReport
from .starts import StartError
from .stay import StayOrChange, StayPoint
from .stay import stay_or_change as _stay_or_change_form
from .today import solve as _solve_form

__version__ = ".".join(map(str, plugin.VERSION))

__all__ = [
    "BatchRecord",
    "BlockFinding",
    "Certificate",
    "CertificateError",
    "Explanation",
    "Family",
    "Finding",
    "LinearForm",
    "Move",
    "Remedy",
    "RouteReport",
    "Solution",
    "StartError",
    "StayOrChange",
    "StayPoint",
    "TuDecision",
    "Verdict",
    "WalkReport",
    "Witness",
    "assess",
    "check_certificate",
    "compile_model",
    "explain",
    "read",
    "solve",
    "solve_many",
    "stay_or_change",
    "totally_unimodular",
]


def assess(
    form_or_model: Any, *, samples: int = 32, time_limit: float | None = None, seed: int = 0
) -> Finding:
    """Find out whether all vertices of a model's relaxation are whole.

    Parameters
    ----------
    form_or_model : LinearForm or Pyomo model
    samples : int
        Vertices to look at in each block without a certificate.
    time_limit : float, optional
        Seconds.
    seed : int
        Of the vertex sampler.

    Returns
    -------
    Finding

    Raises
    ------
    ValueError
        For a negative number of samples or of seconds, and as `compile_model`.

    Examples
    --------
    >>> import pyomo_latpath as latpath
    >>> form = latpath.LinearForm.from_arrays([[1, 1, 0], [0, 1, 1], [1, 0, 1]], row_lower=0,
    ...     row_upper=1, col_lower=0, col_upper=1, cost=1, sense="max")
    >>> finding = latpath.assess(form)
    >>> str(finding.verdict), [str(v) for v in finding.blocks[0].witness.values]
    ('refuted', ['1/2', '1/2', '1/2'])
    """
    form, _ = _form_of(form_or_model)
    return _assess_form(form, samples=samples, time_limit=time_limit, seed=seed)


def check_certificate(form_or_model: Any, certificate: Certificate | dict[str, Any]) -> None:
    """Accept a certificate silently, or refuse it.

    Parameters
    ----------
    form_or_model : LinearForm, Pyomo model, array_like or sparse array
        A matrix alone is shown to be totally unimodular; of a model it is shown that the vertices
        of its relaxation are whole, sides, bounds and declarations included.
    certificate : Certificate, or dict
        As `to_dict` makes it, read from a file, say.

    Raises
    ------
    CertificateError
        One sentence that says what does not hold.

    Examples
    --------
    >>> import pyomo_latpath as latpath
    >>> decision = latpath.totally_unimodular([[1, 1, 0], [0, 1, 1]])
    >>> latpath.check_certificate([[1, 1, 0], [0, 1, 1]], decision.certificate.to_dict())
    """
    if hasattr(form_or_model, "is_constructed"):
        form_or_model, _ = _form_of(form_or_model)
    _check_certificate(form_or_model, certificate)


def solve(form_or_model: Any, **options: Any) -> Solution:
    """Solve a model by the route that its integrality allows.

    A Pyomo model is only read; to have values loaded, use `SolverFactory('latpath')`.

    Parameters
    ----------
    form_or_model : LinearForm or Pyomo model
    **options
        From today's plan, as `pyomo_latpath.today.solve`: start, max_moves, repair_start. The
        others, as `pyomo_latpath.routing.solve`: samples, time_limit, rel_gap, abs_gap, threads,
        seed, highs_options, fixed_plan_prices, log.

    Returns
    -------
    Solution

    Raises
    ------
    ValueError
        As these two and `compile_model`; `StartError` for a start that is no feasible plan.

    Examples
    --------
    >>> import pyomo_latpath as latpath
    >>> form = latpath.LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
    ...                                       col_upper=1, cost=[2, 3])
    >>> latpath.solve(form).objective
    2.0
    """
    form, seconds = _form_of(form_or_model)
    limit = options.get("time_limit")
    if limit is not None and limit > 0:
        options["time_limit"] = max(0.0, limit - seconds)
    return _solve_form(form, **{"compile_seconds": seconds} | options)


def stay_or_change(form_or_model: Any, start: Any, **options: Any) -> StayOrChange:
    """Work out the trade between the objective and the number of changes from today's plan.

    Parameters
    ----------
    form_or_model : LinearForm or Pyomo model
    start : array_like, shape (n,), or mapping of str to float
        Today's plan: whole and feasible, in the order of the columns or by their names.
    **options
        As `pyomo_latpath.stay.stay_or_change`: bonuses, most, and those of a solve.

    Returns
    -------
    StayOrChange
        With `points`, `to_text()`, `to_dict()` and `plot()`.

    Raises
    ------
    ValueError
        As `pyomo_latpath.stay.stay_or_change` and `compile_model`; `StartError` for a start that
        is no feasible plan.

    Examples
    --------
    >>> import pyomo_latpath as latpath
    >>> form = latpath.LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
    ...                                       col_upper=1, cost=[2, 3], col_names=["van", "cart"])
    >>> trade = latpath.stay_or_change(form, {"van": 0, "cart": 1})
    >>> [(point.objective, point.changed, point.bonus) for point in trade.points]
    [(2.0, 2, 0.0), (3.0, 0, 0.5)]
    """
    form, _ = _form_of(form_or_model)
    return _stay_or_change_form(form, start, **options)


def explain(
    form_or_model: Any,
    *,
    time_limit: float | None = None,
    seed: int = 0,
    progress: Callable[[str], None] | None = None,
) -> Explanation:
    """Explain where and why a model's relaxation is fractional, and what can be done.

    Parameters
    ----------
    form_or_model : LinearForm or Pyomo model
        It is only read; the remedies found can be applied to it.
    time_limit : float, optional
        Seconds. Without one, questions whose cost cannot be foreseen get 1 to 20 seconds each.
    seed : int
        Of the vertex sampler.
    progress : callable, optional
        Takes a line about what is being done.

    Returns
    -------
    Explanation
        After Ctrl-C with what was found by then.

    Raises
    ------
    ValueError
        For a negative time limit, and as `compile_model`.

    Examples
    --------
    >>> import pyomo_latpath as latpath
    >>> form = latpath.LinearForm.from_arrays([[1, 1, 0], [0, 1, 1], [3, 0, 2]], row_lower=0,
    ...     row_upper=[1, 1, 4], col_lower=0, col_upper=1, cost=1, sense="max",
    ...     row_names=["cave[1]", "cave[2]", "budget"])
    >>> explanation = latpath.explain(form)
    >>> explanation.culprits[0].groups, explanation.gap.exact
    (('budget',), True)
    """
    form, seconds = _form_of(form_or_model)
    left = time_limit
    if time_limit is not None and time_limit > 0:
        left = max(0.0, time_limit - seconds)
    model = None if form is form_or_model else form_or_model
    return _explain_form(form, time_limit=left, seed=seed, progress=progress, model=model)


def _form_of(form_or_model: Any) -> tuple[LinearForm, float]:
    """The form, and the seconds it took to compile."""
    if isinstance(form_or_model, LinearForm):
        return form_or_model, 0.0
    if not hasattr(form_or_model, "is_constructed"):
        told = type(form_or_model).__name__
        raise ValueError(f"something of type {told} is no model; give a LinearForm or Pyomo model")
    begun = time.perf_counter()
    return compile_model(form_or_model), time.perf_counter() - begun
