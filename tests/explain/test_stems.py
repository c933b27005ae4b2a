"""Rows and columns are grouped as the model names them; by pattern where it does not."""

import numpy as np
import pyomo.environ as pyo
import pytest

from pyomo_latpath.explain.stems import column_stems, row_stems, stem_of
from pyomo_latpath.forms.from_pyomo import compile_model
from pyomo_latpath.forms.linear_form import LinearForm


def form_with(row_names, matrix=None, **sides):
    matrix = np.ones((len(row_names), 2)) if matrix is None else matrix
    sides = {"row_lower": 0, "row_upper": 1} | sides
    return LinearForm.from_arrays(
        matrix, col_lower=0, col_upper=1, cost=0, row_names=row_names, **sides
    )


@pytest.mark.parametrize(
    ("name", "stem"),
    [
        ("demand", "demand"),
        ("demand[3]", "demand"),
        ("demand(3)", "demand"),
        ("demand_3", "demand"),
        ("demand3", "demand"),
        ("demand_3_12", "demand"),
        ("demand[brie,2]", "demand"),
        ("b[1].demand[3]", "b[*].demand"),
        ("b(1).demand", "b[*].demand"),
        ("c_e_demand(3)_", "demand"),
        ("c_u_b(1)_demand(3)_", "b[*]_demand"),
        ("U.001...", "U"),
        ("0012", "#"),
    ],
)
def test_a_stem_is_a_name_without_its_indices(name, stem):
    assert stem_of(name) == stem


def test_components_of_a_pyomo_model_are_its_groups_even_where_names_look_alike():
    model = pyo.ConcreteModel()
    model.x = pyo.Var(range(4), domain=pyo.Binary)
    model.wheel_1 = pyo.Constraint(expr=model.x[0] + model.x[1] <= 1)
    model.wheel_2 = pyo.Constraint(range(2), rule=lambda m, i: m.x[i] + m.x[2] <= 1)
    model.b = pyo.Block([1, 2])
    for k in (1, 2):
        model.b[k].y = pyo.Var(domain=pyo.Binary)
        model.b[k].link = pyo.Constraint(expr=model.b[k].y + model.x[3] <= 1)
    model.goal = pyo.Objective(expr=pyo.quicksum(model.x.values()))
    form = compile_model(model)
    stems = row_stems(form)
    assert (stems.by, stems.names) == ("component", ("wheel_1", "wheel_2", "b[*].link"))
    assert stems.label.tolist() == [0, 1, 1, 2, 2]
    assert set(column_stems(form).names) == {"x", "b[*].y"}


def test_names_that_say_nothing_give_way_to_patterns():
    matrix = np.array([[1, 1], [1, -1], [1, 1], [3, 1], [0, 0]])
    upper = [1, 1, 1, 4, 2]
    stems = row_stems(form_with(["R1", "R2", "R3", "R4", "R5"], matrix, row_upper=upper))
    assert stems.by == "pattern"
    assert stems.names == ("rows like R1", "rows like R2", "rows like R4", "rows like R5")
    assert stems.label.tolist() == [0, 1, 0, 2, 3]


def test_names_that_say_nothing_beside_others_are_told_apart_by_pattern():
    matrix = np.array([[1, 1], [2, 1], [1, 1], [1, 1], [5, 1]])
    stems = row_stems(form_with(["R1", "R2", "demand[1]", "demand[2]", "R3"], matrix))
    assert stems.names == ("rows like R1", "rows like R2", "demand", "rows like R3")
    assert stems.by == "pattern"


def test_names_without_two_of_a_kind_say_nothing():
    names = [f"{chr(97 + k)}{chr(98 + k)}q" for k in range(25)]
    assert row_stems(form_with(names)).names == (f"rows like {names[0]}",)
    assert len(row_stems(form_with(names[:5])).names) == 5


def test_many_kinds_of_odd_coefficients_are_one_pattern():
    matrix = np.column_stack((np.arange(2, 42), np.ones(40)))
    matrix[0] = 1
    stems = row_stems(form_with([f"c{i}" for i in range(40)], matrix))
    assert [rows.size for rows in stems.members()] == [1, 39]


def test_each_row_is_in_one_part():
    stems = row_stems(form_with(["van[1]", "shelf", "van[2]", "7"]))
    assert stems.names == ("van", "shelf", "rows like 7")
    assert [rows.tolist() for rows in stems.members()] == [[0, 2], [1], [3]]


def test_a_form_without_rows_has_no_groups():
    form = LinearForm.from_arrays(
        np.zeros((0, 2)), row_lower=0, row_upper=0, col_lower=0, col_upper=1, cost=0
    )
    assert row_stems(form).names == ()
    assert row_stems(form).members() == []
