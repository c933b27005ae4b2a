"""Remedies made in Pyomo models: the same as on forms, or nothing at all."""

import numpy as np
import pyomo.environ as pyo
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from random_models import pyomo_model, random_form
from switched_models import packing_form, switched_form

import pyomo_latpath as latpath
from pyomo_latpath.deadline import Deadline
from pyomo_latpath.explain.declared import optimum_of
from pyomo_latpath.explain.remedies.find import find_remedies
from pyomo_latpath.forms.normalise import normalise

KINDS = ["switched", "switched mixed", "stable", "general", "decimals"]


def remedies_of(model):
    form = latpath.compile_model(model)
    return form, tuple(find_remedies(normalise(form), None, Deadline(20)))


def small_form(seed, kind):
    rng = np.random.default_rng(seed)
    if kind.startswith("switched"):
        return switched_form(rng, continuous=kind.endswith("mixed"))
    return packing_form(rng, transposed=True) if kind == "stable" else random_form(rng, kind)


@settings(max_examples=40)
@given(st.integers(0, 10**6), st.sampled_from(KINDS))
@example(seed=1401, kind="decimals")
def test_a_model_is_changed_as_its_form_is(seed, kind):
    model = pyomo_model(small_form(seed, kind))
    form, remedies = remedies_of(model)
    best = latpath.solve(form, rel_gap=0)
    for remedy in remedies:
        form = remedy.apply_to(form)
        remedy.apply(model)
    changed = latpath.compile_model(model)
    expected, found = (optimum_of(each, Deadline(None)) for each in (form, changed))
    if expected is not None:
        assert found.bound == pytest.approx(expected.bound, abs=1e-6)
    after = latpath.solve(changed, rel_gap=0)
    assert after.status == best.status
    if best.status == "optimal":
        assert after.objective == pytest.approx(best.objective, abs=1e-6)


def caves():
    """Two caves, opened before lots ripen in them; more room than lots."""
    model = pyo.ConcreteModel(name="caves")
    model.caves, model.lots = pyo.Set(initialize=["north", "south"]), pyo.RangeSet(3)
    model.ripens = pyo.Var(model.lots, model.caves, domain=pyo.Binary)
    model.opened = pyo.Var(model.caves, domain=pyo.Binary)
    model.one_cave = pyo.Constraint(
        model.lots, rule=lambda m, k: pyo.quicksum(m.ripens[k, c] for c in m.caves) == 1
    )
    model.room = pyo.Constraint(
        model.caves,
        rule=lambda m, c: pyo.quicksum(m.ripens[k, c] for k in m.lots) <= 100 * m.opened[c],
    )
    model.cost = pyo.Objective(
        expr=7 * model.opened["north"]
        + 8 * model.opened["south"]
        + pyo.quicksum(k * model.ripens[k, "north"] for k in model.lots)
        + pyo.quicksum((4 - k) * model.ripens[k, "south"] for k in model.lots)
    )
    return model


def test_rows_come_and_go_under_their_names():
    model = caves()
    _, (shrunk, parts, *_) = remedies_of(model)
    new = shrunk.apply(model)
    assert new is model.room_tight and len(new) == 2
    assert not model.room["north"].active and not model.room["south"].active
    rows = parts.apply(model)
    assert rows is model.room_split and len(rows) == 6
    assert str(rows[1].expr) == "ripens[1,north] - opened[north]  <=  0.0"
    assert parts.dropped_row_names == ("room[north]", "room[south]")


def test_a_name_that_the_model_has_meanwhile_is_not_overwritten():
    model = caves()
    _, (shrunk, *_) = remedies_of(model)
    model.room_tight = pyo.Param(initialize=5)
    new = shrunk.apply(model)
    assert model.room_tight.value == 5
    assert new.local_name.startswith("room_tight") and new.local_name != "room_tight"


def test_another_model_is_refused_in_one_sentence_and_left_as_it_is():
    _, remedies = remedies_of(caves())
    other = caves()
    other.del_component(other.room)
    other.room = pyo.Constraint(["north"], rule=lambda m, c: m.opened[c] <= 1)
    with pytest.raises(ValueError, match=r"'caves' has no constraint 'room\[south\]'"):
        remedies[0].apply(other)
    assert other.room["north"].active and other.component("room_tight") is None
    empty = pyo.ConcreteModel(name="cellar")
    empty.room = pyo.Constraint(["north", "south"], rule=lambda m, c: pyo.Constraint.Feasible)
    with pytest.raises(ValueError, match="'cellar' has no"):
        remedies[1].apply(empty)


def test_models_and_forms_are_not_confused():
    model = caves()
    form, remedies = remedies_of(model)
    with pytest.raises(TypeError, match=r"takes a Pyomo model, not LinearForm; .* apply_to\(\)"):
        remedies[0].apply(form)
    with pytest.raises(TypeError, match=r"takes a LinearForm, not ConcreteModel; .* apply\(\)"):
        remedies[0].apply_to(model)


def test_dropped_declarations_keep_their_bounds():
    model = caves()
    model.room.deactivate()
    model.lots_of_north = pyo.Constraint(
        expr=pyo.quicksum(model.ripens[k, "north"] for k in model.lots) <= 1.5
    )
    _, remedies = remedies_of(model)
    dropped = remedies[-1]
    assert dropped.kind == "drop"
    rows = dropped.apply(model)
    ripens = model.ripens[1, "north"]
    assert ripens.is_continuous() and ripens.bounds == (0, 1)
    # The side was rounded because the columns are whole; without their declarations it must be.
    assert rows[1].upper == 1.0


def test_bounds_alone_bring_no_rows():
    model = pyo.ConcreteModel()
    model.vans = pyo.Var(domain=pyo.Integers, bounds=(0.5, 2.5))
    model.carts = pyo.Var(domain=pyo.Integers, bounds=(0, 9))
    model.cargo = pyo.Constraint(expr=model.vans + model.carts <= 9)
    model.cost = pyo.Objective(expr=model.vans + model.carts)
    _, remedies = remedies_of(model)
    assert remedies[0].apply(model) is None
    assert model.vans.bounds == (1, 2) and model.vans.is_integer()


def test_rows_of_a_block_are_found_and_the_new_ones_named_after_it():
    model = pyo.ConcreteModel()
    model.house = pyo.Block(["upper"])
    inner = caves()
    model.house["upper"].transfer_attributes_from(inner)
    _, remedies = remedies_of(model)
    assert remedies[0].row_changes[0].name == "house[upper].room[north]"
    new = remedies[0].apply(model)
    assert new.parent_block() is model and "room_tight" in new.local_name


def odd_pairs(often):
    """Three wheels, any two of which may share a van as often as a parameter says."""
    model = pyo.ConcreteModel(name="pairs")
    model.often = pyo.Param(range(3), initialize=often, mutable=True)
    model.pairs = pyo.Set(initialize=[(0, 1), (0, 2), (1, 2)])
    model.share = pyo.Var(model.pairs, domain=pyo.Integers, bounds=(0, 2))
    model.once = pyo.Constraint(
        range(3),
        rule=lambda m, i: pyo.quicksum(m.share[p] for p in m.pairs if i in p) <= m.often[i],
    )
    model.gain = pyo.Objective(expr=pyo.quicksum(model.share.values()), sense=pyo.maximize)
    return model


def cellars(demand, most):
    """Cheese is made in lots where a cellar is open: no more than is asked for, all of it whole."""
    model = pyo.ConcreteModel(name="cellars")
    model.demand = pyo.Param(initialize=demand, mutable=True)
    model.makes = pyo.Var([1, 2], domain=pyo.NonNegativeIntegers, bounds=(0, most))
    model.opened = pyo.Var([1, 2], domain=pyo.Binary)
    model.asked = pyo.Constraint(expr=model.makes[1] + model.makes[2] == model.demand)
    model.switch = pyo.Constraint([1, 2], rule=lambda m, i: m.makes[i] <= 1000 * m.opened[i])
    model.cost = pyo.Objective(
        expr=3 * model.opened[1] + 9 * model.opened[2] + model.makes[1] + 2 * model.makes[2]
    )
    return model


def refused(remedy, model, sentence):
    before = latpath.compile_model(model)
    with pytest.raises(ValueError, match=sentence):
        remedy.apply(model)
    after = latpath.compile_model(model)
    assert list(after.row_names) == list(before.row_names)


def test_a_cut_is_refused_after_a_side_has_changed():
    model = odd_pairs(1)
    explanation = latpath.explain(model)
    (cut,) = (remedy for remedy in explanation.remedies if remedy.kind == "cut")
    for i in range(3):
        model.often[i] = 2
    refused(cut, model, r"row 'once\[0\]' has changed since it was explained: explain the model a")
    for form in (latpath.compile_model(model), explanation.form.replace(row_upper=2)):
        with pytest.raises(ValueError, match=r"row 'once\[0\]' has changed"):
            cut.apply_to(form)
    for i in range(3):
        model.often[i] = 1
    model.gain.expr = model.gain.expr * 2
    assert cut.apply(model) is not None


def test_a_form_changed_in_place_is_another_one():
    form = latpath.compile_model(odd_pairs(1))
    cut = latpath.explain(form).remedies[0]
    assert cut.apply_to(form).shape[0] > form.shape[0]
    form.row_upper[:] = 2
    with pytest.raises(ValueError, match=r"row 'once\[0\]' has changed"):
        cut.apply_to(form)


def test_a_constraint_put_in_place_of_another_is_compared():
    model = cellars(10, None)
    shrunk = latpath.explain(model).remedies[0]
    for demand in (40, 10):
        model.del_component(model.asked)
        model.asked = pyo.Constraint(expr=model.makes[1] + model.makes[2] == demand)
        if demand == 40:
            refused(shrunk, model, "row 'asked' has changed since it was explained")
    assert len(shrunk.apply(model)) == 2


def test_a_smaller_coefficient_is_refused_after_the_demand_was_raised():
    model = cellars(10, None)
    shrunk = latpath.explain(model).remedies[0]
    assert shrunk.kind == "tighten"
    assert all(min(change.coefficients) == -10 for change in shrunk.row_changes)
    model.demand = 40
    refused(shrunk, model, r"row 'asked' has changed since it was explained: explain the model ag")
    model.demand = 10
    model.makes[2].setub(5)
    refused(shrunk, model, r"the bounds of column 'makes\[2\]' have changed since it was explain")
    model.makes[2].setub(None)
    model.opened[1].domain = pyo.NonNegativeReals
    model.opened[1].bounds = 0, 1
    refused(shrunk, model, r"the domain of column 'opened\[1\]' has changed since it was explained")


def test_rows_that_have_come_or_gone_are_named():
    model = cellars(10, None)
    shrunk = latpath.explain(model).remedies[0]
    model.more = pyo.Constraint(expr=model.makes[1] >= 1)
    refused(shrunk, model, "row 'more' has come since it was explained")
    model.more.deactivate()
    model.asked.deactivate()
    refused(shrunk, model, "row 'asked' has gone since it was explained")
    model.asked.activate()
    model.makes[1].fix(3)
    refused(shrunk, model, "row 'asked' has changed since it was explained")
    model.makes[1].unfix()
    assert len(shrunk.apply(model)) == 2


def test_a_remedy_is_made_once_and_again_only_by_another_explanation():
    model = caves()
    explanation = latpath.explain(model)
    for remedy in explanation.remedies:
        remedy.apply(model)
    for remedy in explanation.remedies:
        refused(remedy, model, "has been made in this model already")
    shrunk, parts = explanation.remedies[:2]
    model.room_split.deactivate()
    parts.apply(model)
    assert len(model.room_split_2) == 6
    for rows in (model.room_tight, model.room_split, model.room_split_2):
        rows.deactivate()
    refused(shrunk, model, r"row 'room\[north\]' has gone since it was explained")


def test_further_components_are_counted():
    model = odd_pairs(1)
    model.cut = pyo.Param(initialize=1)
    names = []
    for _ in range(3):
        new = next(r for r in latpath.explain(model).remedies if r.kind == "cut").apply(model)
        names.append(new.local_name)
        new.deactivate()
    assert [name.removeprefix(names[0]) for name in names[1:]] == ["_2", "_3"]


@settings(max_examples=30)
@given(st.integers(0, 10**6), st.sampled_from(KINDS), st.randoms())
def test_remedies_go_in_any_order_and_only_once(seed, kind, shuffle):
    model = pyomo_model(small_form(seed, kind))
    _, remedies = remedies_of(model)
    order = list(remedies)
    shuffle.shuffle(order)
    for remedy in order:
        copy = model.clone()
        remedy.apply(model)
        remedy.apply(copy)
        if remedy.inequalities:
            with pytest.raises(ValueError, match="has been made in this model already"):
                remedy.apply(model)
