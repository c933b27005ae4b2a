"""From what the user gives to instances: in order, each once, and nothing silently left out."""

from __future__ import annotations

import gc
import os
from pathlib import Path

import odd_instances as odd
import pytest

from pyomo_latpath.batch.inputs import InputError, from_paths, instances_of
from pyomo_latpath.batch.instance import FileInstance, FormInstance, form_digest
from pyomo_latpath.batch.scripts import ScriptInstance
from pyomo_latpath.forms.file_text import ModelFileError

LATE, EARLY = "days/late.min", "days/early.mps.gz"
DEEP, SHOUTED = "days/deep/er/wheels.asn", "days/SHOUTED.LP"


@pytest.fixture(autouse=True)
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "days" / "deep" / "er").mkdir(parents=True)
    others = ["days/notes.txt", "days/build.py", "days/data.json", "days/mps"]
    for name in (LATE, EARLY, DEEP, SHOUTED, *others):
        (tmp_path / name).touch()
    return tmp_path


def names(*paths: str, data: tuple[str, ...] = ()) -> list[str]:
    return [instance.name for instance in from_paths(paths, data)]


def test_a_folder_gives_its_model_files_however_deep():
    assert names("days") == [SHOUTED, DEEP, EARLY, LATE]


def test_paths_keep_their_order_and_count_once():
    assert names(LATE, "days", EARLY) == [LATE, SHOUTED, DEEP, EARLY]


def test_patterns_are_filled_in_here_where_no_shell_did_it():
    assert names("days/*.m*") == [EARLY, LATE]
    assert names("days/**/*.asn") == [DEEP]


def test_a_name_with_brackets_is_a_name_first(folder):
    (folder / "days [1].min").touch()
    assert names("days [1].min") == ["days [1].min"]


def test_a_file_named_on_purpose_is_taken_whatever_it_is():
    assert names("days/notes.txt") == ["days/notes.txt"]


def test_python_files_have_an_instance_for_each_data_file(folder):
    (folder / "more.json").touch()
    found = from_paths(["days/build.py", LATE], ["more.json", "days"])
    assert found == [
        ScriptInstance("days/build.py", "more.json"),
        ScriptInstance("days/build.py", "days/data.json"),
        FileInstance(LATE),
    ]


@pytest.mark.parametrize(
    ("paths", "data", "sentence"),
    [
        (["nowhere"], (), "nowhere: no such file or directory"),
        (["days/*.txt.gz"], (), "days/*.txt.gz: no file matches"),
        (["empty"], (), "empty: the folder holds no file that ends in .mps, .mps.gz, .lp"),
        ([LATE], ("days",), "data are for Python files"),
        (["days/build.py"], ("none.json",), "none.json: no such file"),
    ],
)
def test_what_leads_nowhere_is_named(folder, paths, data, sentence):
    (folder / "empty").mkdir()
    with pytest.raises(InputError) as met:
        from_paths(paths, data)
    assert str(met.value).startswith(sentence)


def test_solve_many_takes_one_path_many_paths_and_all_else_one_by_one():
    assert instances_of("days") == from_paths(["days"])
    assert instances_of(Path("days")) == from_paths(["days"])
    assert instances_of([Path(LATE), EARLY]) == from_paths([LATE, EARLY])
    form = odd.turning()
    found = list(instances_of(iter([Path(LATE), ("turns", form), form])))
    assert [type(item) for item in found] == [FileInstance, FormInstance, FormInstance]
    assert [item.name for item in found] == [LATE, "turns", "instance 3"]


def test_a_path_that_leads_nowhere_among_other_items_costs_itself_only():
    found = list(instances_of(iter(["nowhere", LATE])))
    assert [item.name for item in found] == ["nowhere", LATE]
    with pytest.raises(ValueError, match="nowhere: no such file"):
        found[0].load()


def test_fingerprints_tell_each_change_of_the_source(folder):
    file, script = FileInstance(LATE), ScriptInstance("days/build.py", "days/data.json")
    prints = [file.fingerprint(), script.fingerprint()]
    os.utime(LATE, (0, 0))
    assert prints == [file.fingerprint(), script.fingerprint()]
    (folder / LATE).write_text(odd.FLOW)
    (folder / "days/data.json").write_text("{}")
    assert prints[0] != file.fingerprint()
    assert prints[1] != script.fingerprint()


@pytest.mark.parametrize(
    "change",
    [
        {"cost": 2},
        {"offset": 1.0},
        {"sense": "max"},
        {"integer": False},
        {"row_lower": 0},
        {"row_upper": 2},
        {"col_lower": -1},
        {"col_upper": 2},
    ],
)
def test_every_number_of_a_form_counts(change):
    form = odd.turning()
    assert form_digest(form) == form_digest(form.replace(col_lower=-0.0))
    assert form_digest(form) != form_digest(form.replace(**change))


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        ("model = 5", "build.py: what it gives is of type int, and no Pyomo model"),
        ("x = 5", "build.py: it defines neither a `model` nor"),
        ("a = 1\nb = a / 0", "build.py, line 2: it fails with ZeroDivisionError: division by"),
        ("a = 1\nb = (", "build.py, line 2: it fails with SyntaxError"),
        ("import sys\nsys.exit('no')", "build.py, line 2: it fails with SystemExit: no"),
        ("import no_such_module", "build.py, line 1: it fails with ModuleNotFoundError"),
        (
            "import pyomo.environ as pyo\nmodel = pyo.ConcreteModel()\n"
            "model.x = pyo.Var()\nmodel.o = pyo.Objective(expr=model.x**2)",
            "build.py: ",
        ),
    ],
)
def test_scripts_that_fail_are_told_with_file_and_line(folder, text, sentence):
    (folder / "build.py").write_text(text)
    with pytest.raises(ModelFileError) as met:
        ScriptInstance("build.py").load()
    assert str(met.value).startswith(sentence)


def test_a_script_may_import_what_lies_beside_it(folder):
    (folder / "days" / "cellar_sizes.py").write_text("size = 7")
    (folder / "days" / "build.py").write_text(
        "import pyomo.environ as pyo\nimport cellar_sizes\nmodel = pyo.ConcreteModel()\n"
        "model.x = pyo.Var(bounds=(0, cellar_sizes.size))\n"
        "model.o = pyo.Objective(expr=model.x, sense=pyo.maximize)"
    )
    assert ScriptInstance("days/build.py").load().col_upper.tolist() == [7]


def test_names_outlive_the_model_that_they_come_from(folder):
    (folder / "build.py").write_text(
        "import pyomo.environ as pyo\n\ndef create_model():\n    model = pyo.ConcreteModel()\n"
        "    model.wheels = pyo.Var([1, 2], bounds=(0, 9))\n"
        "    model.shelf = pyo.Constraint(expr=pyo.quicksum(model.wheels.values()) <= 4)\n"
        "    model.o = pyo.Objective(expr=-model.wheels[1])\n    return model\n"
    )
    form = ScriptInstance("build.py").load()
    gc.collect()
    assert list(form.col_names) == ["wheels[1]", "wheels[2]"]
    assert list(form.row_names) == ["shelf"]
