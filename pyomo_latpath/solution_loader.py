"""Hands a solution back to the Pyomo model it belongs to: values, prices and suffixes."""

from __future__ import annotations

import logging
import math
from collections.abc import Callable, Iterator, Sequence
from typing import Any, cast

from pyomo.common.collections import ComponentMap
from pyomo.contrib.solver.common.solution_loader import SolutionLoader
from pyomo.contrib.solver.common.util import NoDualsError, NoReducedCostsError, NoSolutionError
from pyomo.core.staleflag import StaleFlagManager

from .forms.linear_form import ComponentNames, Floats, LinearForm
from .solution import Solution

logger = logging.getLogger("pyomo_latpath")


class LatpathSolutionLoader(SolutionLoader):  # type: ignore[misc]
    """Hands a solution over to the Pyomo model it belongs to."""

    def __init__(self, model: Any, form: LinearForm, solution: Solution) -> None:
        self._pyomo_model = model
        self._variables = cast(ComponentNames, form.col_names).components
        self._constraints = cast(ComponentNames, form.row_names).components
        self._solution = solution

    def get_number_of_solutions(self) -> int:
        return 0 if self._solution.x is None else 1

    def get_vars(self, vars_to_load: Sequence[Any] | None = None) -> ComponentMap:
        if self._solution.x is None:
            raise NoSolutionError()
        return ComponentMap(_pairs(self._variables, self._solution.x, vars_to_load))

    def load_vars(self, vars_to_load: Sequence[Any] | None = None) -> None:
        if self._solution.x is None:
            raise NoSolutionError()
        for variable, value in _pairs(self._variables, self._solution.x, vars_to_load):
            variable.set_value(value, skip_validation=True)
        StaleFlagManager.mark_all_as_stale(delayed=True)

    def get_duals(self, cons_to_load: Sequence[Any] | None = None) -> dict[Any, float]:
        prices = self._solution.row_dual
        return dict(self._priced(self._constraints, prices, cons_to_load, NoDualsError))

    def get_reduced_costs(self, vars_to_load: Sequence[Any] | None = None) -> ComponentMap:
        prices = self._solution.reduced_cost
        return ComponentMap(
            self._priced(self._variables, prices, vars_to_load, NoReducedCostsError)
        )

    def load_import_suffixes(self) -> None:
        """Fill the suffixes `dual` and `rc`; leave them empty, and say so, without prices."""
        suffixes = self._collect_and_clear_import_suffixes()
        for name, read in (("dual", self.get_duals), ("rc", self.get_reduced_costs)):
            if name in suffixes:
                suffixes[name].update(self.prices_or_nothing(name, read))

    def prices_or_nothing(self, name: str, read: Callable[[], Any]) -> Any:
        """Return what `read` reads; nothing, with a line in the log, where there are no prices."""
        try:
            return read()
        except (NoDualsError, NoReducedCostsError):
            logger.warning(
                "suffix %r is left empty: this solve has no prices%s",
                name,
                ""
                if self._solution.x is None
                else "; a model that needs branch and bound has them with fixed_plan_prices=True",
            )
            return {}

    def _priced(
        self,
        components: list[Any],
        prices: Floats,
        wanted: Sequence[Any] | None,
        refusal: type[Exception],
    ) -> list[tuple[Any, float]]:
        """Pair components with their prices, those without one (NaN) left out."""
        if self._solution.x is None:
            raise refusal()
        pairs = list(_pairs(components, prices, wanted))
        priced = [pair for pair in pairs if not math.isnan(pair[1])]
        if pairs and not priced:
            raise refusal()
        return priced


def _pairs(
    components: list[Any], values: Floats, wanted: Sequence[Any] | None
) -> Iterator[tuple[Any, float]]:
    """Pair components with their values: all of them, or those wanted."""
    # Adding 0.0 turns -0.0 into 0.0.
    pairs = zip(components, (values + 0.0).tolist(), strict=True)
    if wanted is None:
        return pairs
    by_id = {id(component): value for component, value in pairs}
    for component in wanted:
        if id(component) not in by_id:
            raise KeyError(f"{component.name!r} is no part of the model that was solved")
    return ((component, by_id[id(component)]) for component in wanted)


def store_legacy(loader: LatpathSolutionLoader, model: Any, solution: Any, symbol_of: Any) -> None:
    """Keep a plan and its prices in a legacy solution, for `model.solutions.load_from`."""
    for variable, value in loader.get_vars().items():
        solution.variable[symbol_of(variable)] = {"Value": value}
    if _imports(model, "rc"):
        for variable, price in loader.prices_or_nothing("rc", loader.get_reduced_costs).items():
            solution.variable[symbol_of(variable)]["Rc"] = price
    if _imports(model, "dual"):
        for constraint, price in loader.prices_or_nothing("dual", loader.get_duals).items():
            solution.constraint[symbol_of(constraint)] = {"Dual": price}


def _imports(model: Any, name: str) -> bool:
    suffix = model.component(name)
    return suffix is not None and suffix.import_enabled()
