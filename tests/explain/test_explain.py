"""The whole answer: in the names of the model, in the time given, whatever happens."""

import json
import time

import numpy as np
import pyomo.environ as pyo
import pytest
from grouped_models import grouped_form
from hypothesis import given, settings
from hypothesis import strategies as st

import pyomo_latpath as latpath
from pyomo_latpath.explain.explanation import Explanation
from pyomo_latpath.explain.stems import stem_of
from pyomo_latpath.forms.from_pyomo import UnsupportedModelError
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.integrality.finding import Verdict


def wheel_turning(rounds=1):
    """Wheels turned by crews: odd cycles of clashes, shelves, and a budget of small change."""
    model = pyo.ConcreteModel()
    model.wheels = pyo.RangeSet(0, 3 * rounds - 1)
    model.turn = pyo.Var(model.wheels, domain=pyo.Binary)
    model.night = pyo.Var(domain=pyo.Binary)

    @model.Constraint(model.wheels)
    def clash(model, i):
        after = i + 1 if i % 3 < 2 else i - 2
        return model.turn[i] + model.turn[after] <= 1

    @model.Constraint()
    def cheap(model):
        return pyo.quicksum((2 + i % 2) * model.turn[i] for i in model.wheels) <= 7 * rounds

    @model.Constraint()
    def shelf(model):
        return model.turn[0] + model.night <= 1

    model.worth = pyo.Objective(
        expr=pyo.quicksum(model.turn.values()) + model.night, sense=pyo.maximize
    )
    return model


def odd_cycles(count, size=5):
    cycle = np.eye(size) + np.roll(np.eye(size), 1, axis=1)
    return LinearForm.from_arrays(
        np.kron(np.eye(count), cycle),
        row_lower=-np.inf,
        row_upper=1,
        col_lower=0,
        col_upper=1,
        cost=-1,
        row_names=[f"ring{k % 2}x[{i}]" for k in range(count) for i in range(size)],
    )


def without_times(told):
    data = told.to_dict()
    data.pop("seconds")
    data["gap"].pop("seconds")
    return data


def test_a_pyomo_model_is_explained_in_its_own_names_and_not_changed():
    model = wheel_turning()
    told = latpath.explain(model)
    assert isinstance(told, Explanation) and told.model is model
    assert told.verdict is Verdict.REFUTED and told.sense == "max" and told.complete
    assert told.grouped_by == "component"
    assert [group.name for group in told.groups] == ["clash", "cheap", "shelf"]
    assert [culprit.groups for culprit in told.culprits] == [("clash", "cheap")]
    (culprit,) = told.culprits
    assert culprit.smallest and culprit.price == pytest.approx(
        culprit.objective_without - told.gap.plan
    )
    assert {stem_of(name) for name in culprit.rows} == {"clash", "cheap"}
    assert [group.name for group in told.groups if group.to_blame] == ["clash", "cheap"]
    assert told.groups[1].certified_alone is False and told.groups[2].certified_alone is True
    assert {violator.groups for violator in told.violators} == {("clash",)}
    assert told.violators[0].cycle and told.violators[0].block == 0
    assert told.fractional.components[0].name == "turn"
    assert all(variable.value is None for variable in model.turn.values())


def test_plain_data_is_ready_for_json_and_names_the_witness():
    told = latpath.explain(wheel_turning())
    data = json.loads(json.dumps(told.to_dict(), allow_nan=False))
    assert data["verdict"] == "refuted" and data["sense"] == "max"
    assert data["gap"]["absolute"] == told.gap.absolute
    assert "form" not in data and "model" not in data and "finding" not in data
    broken = [
        name
        for name, value in zip(
            data["witness"]["column_names"], data["witness"]["values"], strict=True
        )
        if "/" in value
    ]
    assert broken and all(stem_of(name) in ("turn", "night") for name in broken)


def test_the_same_seed_gives_the_same_answer():
    model = wheel_turning(2)
    form = latpath.compile_model(model)
    first, second = (latpath.explain(form, seed=3) for _ in range(2))
    assert without_times(first) == without_times(second)


@settings(max_examples=25)
@given(st.integers(0, 2**32))
def test_every_part_fits_the_others(seed):
    form = grouped_form(np.random.default_rng(seed))
    told = latpath.explain(form)
    proven = told.verdict is Verdict.PROVEN
    names = {group.name for group in told.groups}
    assert sum(group.size for group in told.groups) == told.rows == form.shape[0]
    assert (told.whole is not None) == (proven and told.no_optimum is None)
    assert not (proven and (told.culprits or told.violators))
    if told.no_optimum is None and not proven:
        assert told.culprits
        blamed = {name for culprit in told.culprits for name in culprit.groups}
        assert blamed == {group.name for group in told.groups if group.to_blame} <= names
    if told.fractional is not None and told.fractional.count:
        assert told.verdict is Verdict.REFUTED and told.witness is not None and told.violators
    assert (told.witness is not None) == (told.verdict is Verdict.REFUTED)
    assert told.complete == (told.cut_off == ())
    json.dumps(told.to_dict(), allow_nan=False)


def test_no_time_at_all_leaves_an_honest_answer():
    told = latpath.explain(odd_cycles(20), time_limit=0)
    assert not told.complete and told.cut_off and not told.interrupted
    assert told.culprits == () and told.gap is None
    assert told.groups and told.sketch.counts.sum() == told.nonzeros


@pytest.mark.parametrize("limit", [0.2, 2.0])
def test_a_time_limit_holds_for_all_questions_together(limit):
    form = odd_cycles(400)
    begun = time.perf_counter()
    told = latpath.explain(form, time_limit=limit)
    assert time.perf_counter() - begun < limit + 20
    assert told.rows == 2000


@pytest.mark.parametrize(
    ("stage", "known"),
    [
        ("solving the relaxation", ()),
        ("looking for the smallest conflict", ("fractional",)),
        ("looking for the best whole plan", ("fractional", "violators", "culprits")),
        ("looking for remedies", ("fractional", "violators", "culprits", "gap")),
    ],
)
def test_an_interruption_leaves_what_was_found_by_then(stage, known):
    def interrupt(line):
        if line == stage:
            raise KeyboardInterrupt

    told = latpath.explain(wheel_turning(), progress=interrupt)
    assert told.interrupted and not told.complete
    assert told.cut_off[-1] == f"it was interrupted while {stage}"
    assert all(getattr(told, part) for part in known)
    assert told.remedies == ()
    assert "interrupted" in json.dumps(told.to_dict(), allow_nan=False)


def test_an_interruption_within_the_search_keeps_the_sets_found():
    lines = []

    def interrupt(line):
        lines.append(line)
        if line.startswith("without "):
            raise KeyboardInterrupt

    told = latpath.explain(odd_cycles(2, size=3), progress=interrupt)
    assert told.interrupted and len(told.culprits) == 1
    assert any(group.to_blame for group in told.groups)


def test_an_interruption_among_the_remedies_keeps_those_found():
    caves = LinearForm.from_arrays(
        [[1, 1, 1, -9, 0], [1, 0, 0, 0, 2], [0, 1, 1, 0, 2]],
        row_lower=-np.inf,
        row_upper=[0, 3.5, 3],
        col_lower=0,
        col_upper=1,
        cost=[-2, -2, -2, 4, -1],
    )
    everything = latpath.explain(caves).remedies
    assert len(everything) > 1

    def interrupt(line):
        if line == everything[0].title:
            raise KeyboardInterrupt

    told = latpath.explain(caves, progress=interrupt)
    assert told.interrupted and [each.title for each in told.remedies] == [everything[0].title]
    assert told.cut_off[-1] == "it was interrupted while looking for remedies"


def test_many_groups_are_not_all_named_in_a_sentence():
    cycle = np.eye(3) + np.roll(np.eye(3), 1, axis=1)
    form = LinearForm.from_arrays(
        np.kron(np.eye(40), np.vstack((cycle, cycle[::-1]))),
        row_lower=-np.inf,
        row_upper=1,
        col_lower=0,
        col_upper=1,
        cost=-1,
        row_names=[f"{'abcdef'[k % 6]}{chr(97 + k // 6 % 26)}{k // 156}x" for k in range(240)],
    )
    lines = []
    told = latpath.explain(form, time_limit=8, progress=lines.append)
    assert max(map(len, [*lines, *told.cut_off])) < 200


def test_semicontinuous_columns_are_not_relaxed():
    form = LinearForm.from_arrays(
        [[1, 1]],
        row_lower=1,
        row_upper=9,
        col_lower=[3, 0],
        col_upper=5,
        cost=[1, 4],
        semicontinuous=[True, False],
    )
    told = latpath.explain(form)
    assert told.verdict is Verdict.UNDECIDED and told.gap is None and told.fractional is None
    assert told.reasons[0].kind == "semicontinuous"


def test_models_with_nothing_to_decide_are_whole():
    empty = LinearForm.from_arrays(
        np.zeros((0, 0)), row_lower=0, row_upper=0, col_lower=0, col_upper=0, cost=0
    )
    told = latpath.explain(empty)
    assert told.verdict is Verdict.PROVEN and told.whole is not None and told.complete


@pytest.mark.parametrize(
    ("options", "said"),
    [
        ({"time_limit": -1}, "time_limit is -1"),
        ({"time_limit": float("nan")}, "time_limit is nan"),
        ({"seed": -3}, "seed is -3"),
    ],
)
def test_bad_options_get_one_clear_sentence(options, said):
    with pytest.raises(ValueError, match=said):
        latpath.explain(odd_cycles(1), **options)


@pytest.mark.parametrize("what", ["a word", None, [1, 2]])
def test_what_is_no_model_is_refused(what):
    with pytest.raises(ValueError, match="is no model"):
        latpath.explain(what)


def test_what_no_linear_form_can_hold_is_named():
    model = wheel_turning()
    model.area = pyo.Constraint(expr=model.turn[0] * model.turn[1] <= 1)
    with pytest.raises(UnsupportedModelError, match="area"):
        latpath.explain(model)


def lots():
    """Cheese made in two months, each with a big-M row; without `balance` nothing is made."""
    model = pyo.ConcreteModel()
    model.months = pyo.RangeSet(2)
    model.makes = pyo.Var(model.months, domain=pyo.NonNegativeReals)
    model.kept = pyo.Var(model.months, domain=pyo.NonNegativeReals)
    model.works = pyo.Var(model.months, domain=pyo.Binary)
    model.balance = pyo.Constraint(
        model.months,
        rule=lambda m, t: (m.kept[t - 1] if t > 1 else 0) + m.makes[t] - m.kept[t] == 3 * t,
    )
    model.working = pyo.Constraint(model.months, rule=lambda m, t: m.makes[t] <= 50 * m.works[t])
    model.cost = pyo.Objective(
        expr=pyo.quicksum(40 * m + model.makes[t] * t for t, m in model.works.items())
        + pyo.quicksum(2 * kept for kept in model.kept.values())
    )
    return model


def test_of_culprits_of_one_size_the_first_changes_the_bound_least():
    told = latpath.explain(lots())
    order = [
        (len(each.groups), abs(each.objective_without - told.gap.rounded_bound))
        for each in told.culprits
    ]
    assert len(order) > 1 and order == sorted(order)
    assert told.culprits[0].groups == ("working",)
    assert "columns together" not in told.to_text()


def test_the_rows_to_leave_out_are_asked_for_last():
    lines = []
    latpath.explain(wheel_turning(2), progress=lines.append)
    rows = [k for k, line in enumerate(lines) if line.startswith("looking for the fewest rows of")]
    assert rows and min(rows) > lines.index("looking for remedies")
