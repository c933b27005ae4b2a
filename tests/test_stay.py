"""The trade between the objective and the number of changes."""

import json
import re

import numpy as np
import pyomo.environ as pyo
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from small_forms import assignment
from tu_models import KINDS, feasible, plans, tu_form

import pyomo_latpath as latpath
from pyomo_latpath import routing
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.starts import StartError
from pyomo_latpath.stay import stay_or_change


def two_choices(**more):
    data = {"row_lower": 1, "row_upper": 1, "col_lower": 0, "col_upper": 1, "cost": [5, 3, 9, 1]}
    return LinearForm.from_arrays([[1, 1, 0, 0], [0, 0, 1, 1]], **(data | more))


TODAY = [1, 0, 1, 0]


def hull(form, start):
    """Corners (distance, objective) of the lower hull of all plans, from the best to today's."""
    sign = 1 if form.sense == "min" else -1
    cheapest = {}
    for plan in plans(form):
        distance = float(np.abs(plan - start).sum())
        value = sign * float(form.cost @ plan)
        cheapest[distance] = min(value, cheapest.get(distance, value))
    corners = []
    for point in sorted(cheapest.items(), reverse=True):
        while len(corners) > 1 and cross(corners[-2], corners[-1], point) <= 0:
            corners.pop()
        corners.append(point)
    best = min(cheapest.values())
    while corners[0][1] > best or (len(corners) > 1 and corners[1][1] == best):
        corners.pop(0)
    return [(distance, sign * value) for distance, value in corners]


def cross(a, b, c):
    """Positive where b lies below the line from a to c, a being the farthest."""
    return (a[0] - b[0]) * (c[1] - b[1]) - (b[0] - c[0]) * (b[1] - a[1])


@given(st.sampled_from(KINDS), st.integers(0, 10**6))
@settings(max_examples=60)
def test_the_corners_are_those_of_all_plans(kind, seed):
    form, start = tu_form(np.random.default_rng(seed), kind, m=3, n=5)
    points = stay_or_change(form, start, most=99).points
    assert [(p.distance, p.objective) for p in points] == hull(form, start)
    bonuses = [p.bonus for p in points]
    assert bonuses == sorted(bonuses)
    assert all(np.isfinite(bonuses))
    sign = 1 if form.sense == "min" else -1
    everything = plans(form)
    for p in points:
        assert feasible(form, p.x)
        assert p.changed == (p.x != start).sum()
        worths = [
            sign * form.cost @ plan + p.bonus * np.abs(plan - start).sum() for plan in everything
        ]
        assert sign * p.objective + p.bonus * p.distance == pytest.approx(min(worths))


def test_given_bonuses_keep_their_order():
    points = stay_or_change(two_choices(), TODAY, [9, 2, 0]).points
    assert [(p.bonus, p.objective, p.changed) for p in points] == [(9, 14, 0), (2, 6, 2), (0, 4, 4)]


def test_few_solves_still_know_when_to_stay():
    rng = np.random.default_rng(5)
    n = 20
    form = assignment(rng.integers(1, 99, (n, n)))
    start = routing.solve(form.replace(cost=form.cost + rng.integers(-20, 21, n * n))).x
    every = stay_or_change(form, start, most=99).points
    few = stay_or_change(form, start, most=1).points
    assert 2 < len(few) < len(every)
    assert few[-1].bonus == every[-1].bonus
    assert few[-1].changed == 0
    assert {p.objective for p in few} <= {p.objective for p in every}


def test_the_best_plan_of_today_is_the_only_point():
    (point,) = stay_or_change(two_choices(), [0, 1, 0, 1]).points
    assert (point.bonus, point.objective, point.changed) == (0, 4, 0)


def test_starts_inside_their_bounds_count_every_unit():
    form = LinearForm.from_arrays(
        [[1, 1]], row_lower=6, row_upper=6, col_lower=0, col_upper=9, cost=[3, 1]
    )
    points = stay_or_change(form, [4, 2]).points
    assert [(p.objective, p.changed, p.distance) for p in points] == [(6, 2, 8), (14, 0, 0)]
    assert points[-1].bonus == 1


def test_a_model_by_names():
    form = two_choices(col_names=["a1", "a2", "b1", "b2"])
    trade = latpath.stay_or_change(form, {"a1": 1, "a2": 0, "b1": 1, "b2": 0})
    assert [p.objective for p in trade.points] == [4, 6, 14]


def fixed_night():
    model = pyo.ConcreteModel()
    model.van = pyo.Var([1, 2, 3], domain=pyo.Binary)
    model.one = pyo.Constraint(expr=pyo.quicksum(model.van.values()) == 2)
    model.cost = pyo.Objective(expr=pyo.quicksum(k * model.van[k] for k in (1, 2, 3)))
    model.van[3].fix(1)
    return model


def test_fixed_variables_may_be_named_with_their_value():
    model = fixed_night()
    start = {"van[1]": 0, "van[2]": 1, "van[3]": 1}
    trade = latpath.stay_or_change(model, start)
    assert [point.objective for point in trade.points] == [4, 5]
    with pytest.raises(StartError, match=r"0 for 'van\[3\]', which the model has fixed at 1"):
        latpath.stay_or_change(model, start | {"van[3]": 0})
    for name in ("van", "van[", "", 5):
        with pytest.raises(StartError, match=f"{re.escape(repr(name))}, which is no column"):
            latpath.stay_or_change(model, start | {name: 0})


def test_it_is_data_text_and_picture():
    trade = stay_or_change(two_choices(), TODAY)
    data = json.loads(json.dumps(trade.to_dict()))
    assert data["points"][1] == {"bonus": 2.5, "objective": 6, "changed": 2, "distance": 2}
    head, *rows = trade.to_text().splitlines()
    assert head.split() == ["bonus", "objective", "changed", "distance"]
    assert rows[1].split() == ["2.5", "6", "2", "2"]
    pytest.importorskip("matplotlib")
    axes = trade.plot()
    assert axes.lines[0].get_xydata().tolist() == [[4, 4], [2, 6], [0, 14]]
    assert trade.plot(axes) is axes
    assert len(axes.lines) == 2


def test_a_picture_without_matplotlib_says_what_to_install(monkeypatch):
    monkeypatch.setitem(__import__("sys").modules, "matplotlib.figure", None)
    with pytest.raises(ImportError, match=r"pyomo_latpath\[plot\]"):
        stay_or_change(two_choices(), TODAY).plot()


@pytest.mark.parametrize(
    ("form", "start", "bonuses", "kind", "reason"),
    [
        (two_choices(), [1, 0, 1, 1], None, StartError, "row 'r2' is at 2"),
        (two_choices(), TODAY, [1, -1], ValueError, "bonus is -1"),
        (two_choices(), TODAY, [np.inf], ValueError, "bonus is inf"),
        (two_choices(semicontinuous=True), TODAY, None, ValueError, "semicontinuous"),
        (
            two_choices(row_lower=1, row_upper=np.inf, col_upper=np.inf, cost=-1),
            TODAY,
            None,
            ValueError,
            "'unbounded', not with a best plan",
        ),
    ],
)
def test_what_has_no_trade_is_refused(form, start, bonuses, kind, reason):
    with pytest.raises(kind, match=reason):
        stay_or_change(form, start, bonuses)
