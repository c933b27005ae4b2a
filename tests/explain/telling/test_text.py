"""An explanation as text and in a notebook: one screen says it all, and samples are no proof."""

from __future__ import annotations

from dataclasses import replace

import made_up
import numpy as np
import pytest

from pyomo_latpath.explain.telling import words
from pyomo_latpath.explain.telling.notebook import to_notebook
from pyomo_latpath.explain.telling.text import to_text

MAKERS = (*made_up.MAKERS, made_up.very_large)
SCREEN = 24


def screen(told) -> list[str]:
    """The lines before the first empty one."""
    lines = to_text(told).splitlines()
    return lines[: lines.index("")] if "" in lines else lines


@pytest.mark.parametrize("maker", MAKERS)
def test_the_answer_fits_on_one_screen_and_every_line_in_80_columns(maker):
    told = maker()
    assert 3 <= len(screen(told)) <= SCREEN
    assert max(map(len, to_text(told).splitlines())) <= 80


def test_the_first_screen_has_blame_conflict_gap_and_remedy():
    shown = " ".join(" ".join(screen(made_up.fractional())).split())
    assert shown.startswith("Fractional because of 'budget'")
    assert "12 of 720 integer columns are fractional" in shown
    assert "147.53 (1.56%) apart" in shown
    assert "Without 'budget' what is left is proven whole" in shown
    assert "so these rows cost 2,880" in shown
    assert "5 rows and 5 columns on one cycle" in shown
    assert "The bound goes from 9,612.53 to 9,530" in shown


@pytest.mark.parametrize("sense", ["min", "max"])
def test_the_remedy_told_first_is_the_one_that_does_most(sense):
    sign = 1 if sense == "min" else -1
    ends = {"little": 1.0, "most": 5.0, "nothing": 0.0}
    remedies = tuple(
        made_up.remedy(title=title, bound_before=10.0, bound_after=10.0 + sign * gain)
        for title, gain in ends.items()
    )
    form = made_up.FORM.replace(sense=sense)
    told = made_up.fractional(remedies=remedies, form=form)
    assert words.best_remedy(told).startswith("Most.")
    assert "There are 2 more" in words.best_remedy(told)


@pytest.mark.parametrize("form", [to_text, to_notebook])
def test_what_rests_on_samples_says_so(form):
    told = " ".join(form(made_up.sampled()).split())
    assert "32 sampled vertices: no proof" in told
    assert "Proven" not in told


def test_culprits_that_hold_everything_are_not_called_the_cause():
    told = made_up.fractional()
    everything = replace(told.culprits[0], structures=("trivial",))
    told = replace(told, culprits=(everything,))
    assert words.headline(told) == "The relaxation is fractional at its optimum"
    assert "no part of the model stands out" in words.blame(told)


def test_a_count_that_rounding_changes_is_told_before_and_after():
    told = made_up.fractional()
    count = told.fractional.count
    same = replace(told, fractional=replace(told.fractional, declared=count))
    assert "before sides" not in words.how_bad(same)
    more = replace(told, fractional=replace(told.fractional, declared=count + 3))
    assert f", {count + 3} before sides and bounds are rounded inwards." in words.how_bad(more)


def test_a_coefficient_is_told_as_a_fraction():
    entries = np.array([[4 / 3]])
    single = replace(
        made_up.odd_cycle(3), row_names=("rent",), column_names=("cave",), entries=entries
    )
    assert words.violator_words(single) == "Row 'rent' has the coefficient 4/3 at 'cave'."


@pytest.mark.parametrize(
    ("changes", "sentence"),
    [
        ({}, "147.53 (1.56%) apart"),
        ({"plan_status": "time_limit"}, "at most 147.53 (1.56%) apart"),
        ({"plan": float("nan"), "plan_status": "time_limit"}, "no whole plan was found in time"),
        ({"plan_status": "interrupted"}, "the best plan found by then 9,"),
        ({"plan": float("nan"), "plan_status": "interrupted"}, "no whole plan was found by then"),
        ({"plan": float("nan"), "plan_status": "unknown"}, "was not looked for"),
        ({"plan": float("nan"), "plan_status": "infeasible"}, "no whole plan exists"),
        ({"plan": 9612.53}, "and so is the best whole plan's"),
        ({"rounded_bound": 9500.0}, "(9,500 with sides and bounds rounded inwards)"),
        ({"declared_bound": float("nan")}, ""),
    ],
)
def test_the_gap_is_told_as_far_as_it_is_known(changes, sentence):
    gap = made_up.fractional().gap
    told = words.gap_words(replace(gap, **changes))
    assert sentence in told
    assert bool(told) == bool(sentence)


@pytest.mark.parametrize(
    ("integers", "count", "verb"), [(1, 0, "is"), (1, 1, "is"), (2, 0, "are"), (2, 1, "is")]
)
def test_columns_are_counted_as_people_speak(integers, count, verb):
    told = made_up.fractional()
    few = replace(told.fractional, integers=integers, count=count, declared=count)
    noun = "column" if integers == 1 else "columns"
    said = words.how_bad(replace(told, fractional=few))
    assert said.startswith(f"{count} of {integers} integer {noun} {verb} fractional")


def test_structures_are_told_in_words():
    culprit = replace(made_up.fractional().culprits[0], structures=("conetwork", "network"))
    assert "(transposed network, network)" in words.culprit_words(culprit, None)


def test_all_that_ties_integer_columns_singles_out_nothing():
    culprit = replace(made_up.fractional().culprits[0], structures=("trivial",))
    said = words.culprit_words(culprit, None)
    assert said.startswith("Only 'budget' ties integer columns to others")


def test_what_was_left_open_is_told():
    shown = "\n".join(screen(made_up.unfinished()))
    assert "Not known yet" in shown
    assert "The relaxation was not solved" in shown


def test_names_end_no_line_and_carry_no_control_characters():
    told = to_text(made_up.hostile())
    assert all(line.isprintable() for line in told.split("\n"))
    assert "turned\\u202egnp.exe" in told


def test_an_inequality_is_written_as_people_do():
    (row,) = made_up.remedy().inequalities
    assert words.inequality(row) == "odd_cut[0]: open[cave 0] - 2 open[cave 1] <= 1"
    assert words.inequality(row, most=1) == "odd_cut[0]: open[cave 0] + 1 more term <= 1"
    both = replace(row, lower=0.0)
    assert words.inequality(both) == "odd_cut[0]: 0 <= open[cave 0] - 2 open[cave 1] <= 1"
    assert words.inequality(replace(row, lower=1.0)).endswith(" = 1")


def test_the_notebook_form_is_short_and_scoped():
    for maker in MAKERS:
        html = to_notebook(maker())
        assert len(html) < 8_000
        assert "<script" not in html
        style = html[html.index("<style>") + 7 : html.index("</style>")]
        rules = [rule.split("{")[0].strip() for rule in style.split("}") if rule.strip()]
        assert all(rule.startswith(".latpath-told") for rule in rules)


def test_a_model_that_rounding_makes_whole_is_not_called_whole_as_it_stands():
    gap = replace(made_up.whole().gap, declared_bound=13.5)
    assert "once sides and bounds are rounded" in words.headline(replace(made_up.whole(), gap=gap))


def test_a_model_without_integer_columns_is_called_a_linear_program():
    assert words.headline(replace(made_up.whole(), integers=0)).startswith("A linear program")


@pytest.mark.parametrize(
    ("kind", "names", "sentence"),
    [
        ("infeasible", ("supply", "demand"), "'supply' and 'demand' conflict."),
        ("infeasible", ("supply",), "'supply' cannot be met, even by itself."),
        ("unbounded", ("van",), "'van' moves without end."),
        ("unbounded", ("van", "cart"), "'van' and 'cart' move without end."),
        ("infeasible", (), ""),
    ],
)
def test_models_without_a_best_plan_name_what_is_to_blame(kind, names, sentence):
    told = made_up.infeasible()
    told = replace(told, no_optimum=replace(told.no_optimum, kind=kind, names=names))
    assert words.conflict(told) == sentence


def test_a_culprit_that_keeps_the_model_bounded_says_so():
    culprit = replace(made_up.fractional().culprits[0], objective_without=float("-inf"))
    assert "better ones without end" in words.culprit_words(culprit, None)
    free = replace(culprit, objective_without=5.0, price=0.0)
    assert words.culprit_words(free, None).endswith("so these rows cost nothing.")


def test_rows_are_not_priced_as_if_wholeness_cost_what_they_do():
    told = made_up.fractional()
    gap = replace(told.gap, declared_bound=9.0, rounded_bound=9.0, plan=9.0, plan_status="optimal")
    culprit = replace(told.culprits[0], objective_without=2.0, price=7.0)
    said = words.culprit_words(culprit, gap)
    assert "leaving these rows out would change the optimum by 7" in said
    assert said.endswith("wholeness costs nothing at this objective.") and "cost 7" not in said


def test_samples_are_not_held_against_a_proof():
    assert words.sampled_shares(made_up.sampled())
    proven = replace(made_up.sampled(), finding=made_up.whole().finding)
    assert words.sampled_shares(proven) == ""
