"""Families: tables of every layout, what is wrong with them, and members as instances."""

from __future__ import annotations

import gzip
import pickle
from pathlib import Path

import numpy as np
import pytest

from pyomo_latpath.batch.family import Family
from pyomo_latpath.forms.file_text import ModelFileError
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.routing import solve


@pytest.fixture
def form() -> LinearForm:
    """Two caves, three towns: wheels go where they are asked for."""
    A = np.zeros((5, 6))
    for cave in range(2):
        for town in range(3):
            A[cave, 3 * cave + town] = A[2 + town, 3 * cave + town] = 1
    return LinearForm.from_arrays(
        A,
        row_lower=[0, 0, 2, 3, 1],
        row_upper=[4, 4, 2, 3, 1],
        col_lower=0,
        col_upper=9,
        cost=[4, 6, 9, 5, 3, 8],
        row_names=["stock[east]", "stock[west]", "need[a]", "need[b]", "need[c]"],
        col_names=[f"send[{cave},{town}]" for cave in ("east", "west") for town in "abc"],
    )


def write(folder: Path, name: str, text: str) -> Path:
    path = folder / name
    path.write_text(text)
    return path


ENTRIES = """instance,what,name,value
mon,cost,"send[east,a]",7.5
mon,row_upper,stock[east],3
tue,row_lower,need[a],1
tue,row_upper,need[a],1
tue,col_upper,"send[west,b]",inf
"""


def test_entries_change_what_they_name_and_leave_the_rest(tmp_path, form):
    mon, tue = Family(form, write(tmp_path, "nights.csv", ENTRIES))
    assert (mon.name, tue.name) == ("mon", "tue")
    assert mon.load().cost.tolist() == [7.5, 6, 9, 5, 3, 8]
    assert mon.load().row_upper.tolist() == [3, 4, 2, 3, 1]
    assert tue.load().cost.tolist() == form.cost.tolist()
    assert tue.load().row_lower.tolist() == [0, 0, 1, 3, 1]
    assert tue.load().col_upper.tolist() == [9, 9, 9, 9, np.inf, 9]
    assert mon.load().matrix is form.matrix
    assert form.row_upper.tolist() == [4, 4, 2, 3, 1]


def test_costs_by_column_keep_what_is_not_told(tmp_path, form):
    text = 'instance,"send[west,a]","send[east,a]"\nmon,1,2\n\ntue,,8\n'
    mon, tue = Family(form, write(tmp_path, "costs.csv", text))
    assert mon.load().cost.tolist() == [2, 6, 9, 1, 3, 8]
    assert tue.load().cost.tolist() == [8, 6, 9, 5, 3, 8]


def test_gzipped_and_with_a_byte_order_mark(tmp_path, form):
    path = tmp_path / "nights.csv.gz"
    path.write_bytes(gzip.compress(b"\xef\xbb\xbf" + ENTRIES.encode()))
    assert [member.name for member in Family(form, path)] == ["mon", "tue"]


def test_parquet_holds_both_layouts(tmp_path, form):
    pa = pytest.importorskip("pyarrow")
    pq = pytest.importorskip("pyarrow.parquet")
    rows = [line.rsplit(",", 1) for line in ENTRIES.replace('"', "").splitlines()[1:]]
    heads = [head.split(",", 2) for head, _ in rows]
    columns = [*map(list, zip(*heads, strict=True)), [float(value) for _, value in rows]]
    names = ["instance", "what", "name", "value"]
    pq.write_table(pa.table(dict(zip(names, columns, strict=True))), tmp_path / "n.parquet")
    costs = {"instance": [1, 2], "send[east,a]": [2.0, None], "send[west,a]": [3.0, 4.0]}
    pq.write_table(pa.table(costs), tmp_path / "c.parquet")
    from_csv = Family(form, write(tmp_path, "n.csv", ENTRIES))
    for member, same in zip(Family(form, tmp_path / "n.parquet"), from_csv, strict=True):
        assert member.fingerprint() == same.fingerprint()
    one, two = Family(form, tmp_path / "c.parquet")
    assert (one.name, one.load().cost.tolist()) == ("1", [2, 6, 9, 3, 3, 8])
    assert two.load().cost.tolist() == [4, 6, 9, 4, 3, 8]


def test_arrays_on_disk_and_in_memory_say_the_same(tmp_path, form):
    rng = np.random.default_rng(0)
    arrays = {
        "cost": rng.integers(1, 9, (3, 6)),
        "row_upper": form.row_upper + np.arange(3.0)[:, None],
        "instance": np.array(["mon", "tue", "wed"]),
    }
    np.savez(tmp_path / "nights.npz", **arrays)
    np.save(tmp_path / "costs.npy", arrays["cost"].astype(float))
    stored, given = Family(form, tmp_path / "nights.npz"), Family(form, arrays)
    for one, two in zip(stored, given, strict=True):
        assert one.name == two.name
        assert one.fingerprint() == two.fingerprint()
        assert one.load().row_upper.tolist() == two.load().row_upper.tolist()
    costs = [member.load().cost.tolist() for member in Family(form, str(tmp_path / "costs.npy"))]
    assert costs == arrays["cost"].tolist()


def test_vectors_member_by_member(form):
    family = Family(form, ({"cost": np.full(6, k)} for k in range(3)))
    assert [member.load().cost[0] for member in family] == [0, 1, 2]
    [member] = Family(form, [{"weight": [1]}])
    with pytest.raises(ValueError, match="member 1 changes 'weight'; it can change cost, row_"):
        member.load()
    [member] = Family(form, [{"cost": [1, 2]}])
    with pytest.raises(ValueError, match="cost has shape"):
        member.load()


@pytest.mark.parametrize(
    ("line", "sentence"),
    [
        ("mon,cost,send,1", "line 2: the form has no column 'send'"),
        ("mon,row_upper,send,1", "line 2: the form has no row 'send'"),
        ("mon,price,need[a],1", "line 2: 'price' cannot change; 'what' is one of cost, row_lower"),
        ("mon,row_upper,need[a],many", "line 2: the row_upper of 'need[a]' is 'many', not a num"),
        ("mon,row_upper,need[a],nan", "line 2: the row_upper of 'need[a]' is nan"),
        ('mon,cost,"send[east,a]",inf', "line 2: the cost of 'send[east,a]' is inf"),
        ("mon,row_upper,need[a]", "line 2: there are 3 cells; it needs instance, what, name"),
        ("mon,row_upper,need[a],-inf", "line 2: the row_upper of 'need[a]' is -inf"),
        ('mon,col_lower,"send[east,a]",inf', "line 2: the col_lower of 'send[east,a]' is inf"),
        ("mon,row_upper,need[a],1\nmon,row_upper,need[a],2", "line 3: the row_upper of 'need[a]'"),
    ],
)
def test_a_bad_line_is_the_error_of_its_member_alone(tmp_path, form, line, sentence):
    text = f"instance,what,name,value\n{line}\ntue,row_upper,stock[east],3\n"
    mon, tue = Family(form, write(tmp_path, "nights.csv", text))
    with pytest.raises(ModelFileError) as raised:
        mon.load()
    assert sentence in str(raised.value)
    assert str(tmp_path / "nights.csv") in str(raised.value)
    assert tue.load().row_upper[0] == 3


def test_lines_of_a_member_stand_together(tmp_path, form):
    text = ENTRIES + "mon,row_upper,stock[west],3\n"
    *_, again = Family(form, write(tmp_path, "nights.csv", text))
    with pytest.raises(ModelFileError, match="line 7: lines of 'mon' stand further up, too"):
        again.load()


def test_in_a_table_of_costs_a_member_has_one_line(tmp_path, form):
    text = 'instance,"send[east,a]"\nmon,1\ntue,2\nmon,3\n'
    *_, again = Family(form, write(tmp_path, "nights.csv", text))
    with pytest.raises(ModelFileError, match="line 4: a line of 'mon' stands further up, too"):
        again.load()


@pytest.mark.parametrize(
    ("name", "text", "sentence"),
    [
        ("t.csv", "", "line 1: the first line must name the columns"),
        ("t.csv", "instance;what;name;value\n", "name the columns, separated by commas"),
        ("t.csv", "instance,what,name,value\n", "t.csv: the table has no members"),
        ("t.csv", "what,name\n", "line 1: the first line must name the columns"),
        ("t.csv", "instance,van\n", "line 1: the form has no column 'van'; a table has the"),
        ("t.csv", 'instance,"send[east,a]","send[east,a]"\n', "line 1: column 'send[east,a]' st"),
        ("t.npz", "nothing", "it holds no plain arrays"),
        ("t.npy", "nothing", "it holds no plain arrays"),
        ("t.parquet", "nothing", "it is no Parquet file"),
        ("t.xls", "", "a table of changes is a .csv, .parquet, .npz or .npy file"),
    ],
)
def test_a_table_that_fits_nothing_is_refused_at_once(tmp_path, form, name, text, sentence):
    with pytest.raises(ModelFileError) as raised:
        Family(form, write(tmp_path, name, text))
    assert sentence in str(raised.value)
    with pytest.raises(FileNotFoundError):
        Family(form, tmp_path / f"lost{Path(name).suffix or '.csv'}.csv")


@pytest.mark.parametrize(
    ("arrays", "sentence"),
    [
        ({"weight": [[1.0]]}, "there is an array 'weight'"),
        ({"cost": [[1.0, 2.0]]}, "'cost' has shape (1, 2); it needs 6 numbers a member"),
        ({"cost": np.ones((2, 6)), "row_upper": np.ones((1, 5))}, "cost 2, row_upper 1"),
        ({"cost": [["a"] * 6]}, "'cost' holds"),
        ({"cost": np.ones((2, 6)), "instance": ["mon", "mon"]}, "names 'mon' more than once"),
        ({"cost": np.ones((0, 6))}, "no member"),
    ],
)
def test_arrays_that_do_not_fit_are_refused(form, arrays, sentence):
    with pytest.raises(ValueError) as raised:
        Family(form, arrays)
    assert sentence in str(raised.value)


def test_a_file_of_arrays_is_named_once(tmp_path, form):
    np.save(tmp_path / "costs.npy", np.ones((2, 5)))
    with pytest.raises(ModelFileError) as raised:
        Family(form, tmp_path / "costs.npy")
    assert str(raised.value).count("costs.npy") == 1


def test_what_no_form_can_have_is_told_by_the_member(form):
    [member] = Family(form, {"row_lower": np.full((1, 5), np.inf)})
    with pytest.raises(ValueError, match=r"row 'stock\[east\]' has the limits"):
        member.load()


def test_fingerprints_tell_members_apart_and_last(tmp_path, form):
    mon, tue = Family(form, write(tmp_path, "nights.csv", ENTRIES))
    again, _ = Family(form, tmp_path / "nights.csv")
    assert mon.fingerprint() == again.fingerprint() != tue.fingerprint()
    other, _ = Family(form.replace(offset=1), tmp_path / "nights.csv")
    assert other.fingerprint() != mon.fingerprint()


def test_many_members_travel_with_one_form():
    big = LinearForm.from_arrays(
        np.ones((1, 5000)), row_lower=0, row_upper=9, col_lower=0, col_upper=1, cost=1
    )
    members = list(Family(big, {"row_upper": np.arange(50.0)[:, None]}))
    alone = len(pickle.dumps(members[0]))
    assert len(pickle.dumps(members)) < 2 * alone
    received = pickle.loads(pickle.dumps(members))
    assert received[0].load().matrix is received[49].load().matrix


def test_members_recognise_nothing_twice_and_answer_as_forms_do(form):
    rng = np.random.default_rng(1)
    family = Family(form, {"cost": rng.integers(1, 9, (20, 6))})
    met = []
    for member in family:
        mine = solve(member.load())
        fresh = solve(
            LinearForm.from_arrays(
                form.matrix,
                row_lower=form.row_lower,
                row_upper=form.row_upper,
                col_lower=form.col_lower,
                col_upper=form.col_upper,
                cost=member.load().cost,
            )
        )
        assert (mine.status, mine.objective) == (fresh.status, fresh.objective)
        assert mine.report.proof == fresh.report.proof == "exact"
        met.append(mine.report.recognition)
    assert met == ["found"] + ["remembered"] * 19
