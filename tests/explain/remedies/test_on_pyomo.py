"""Remedies made in Pyomo models: the same as on forms, or nothing at all."""

import numpy as np
import pyomo.environ as pyo
import pytest
from hypothesis import given, settings
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
