"""Certificates on disk: found again, checked each time, bounded, safe among many processes."""

from __future__ import annotations

import errno
import json
import logging
import multiprocessing
import os
import resource
import time
from pathlib import Path

import numpy as np
import pytest
import scipy.sparse as sp
from hypothesis import given
from hypothesis import strategies as st
from tu_models import tu_matrix

from pyomo_latpath.batch import store as store_module
from pyomo_latpath.batch.store import CertificateStore, key_of
from pyomo_latpath.forms.linear_form import LinearForm
from pyomo_latpath.integrality.recognise import prove_tu
from pyomo_latpath.routing import solve


def drawn(seed: int, kind: str = "network", m: int = 5, n: int = 8) -> sp.csc_array:
    matrix = sp.csc_array(tu_matrix(np.random.default_rng(seed), kind, m, n))
    matrix.sum_duplicates()
    matrix.eliminate_zeros()
    return matrix


def keep(store: CertificateStore, matrix: sp.csc_array) -> None:
    store.keep(matrix, prove_tu(matrix), seconds=1.0)


def files(folder: Path) -> list[Path]:
    return [path for path in folder.glob("*/*") if path.suffix == ".json"]


def test_what_one_process_found_another_recalls_and_checks(tmp_path):
    matrix = drawn(0)
    keep(CertificateStore(tmp_path), matrix)
    other = CertificateStore(tmp_path)
    name, part = other.recall(matrix)
    assert name == prove_tu(matrix)[0]
    part.check(matrix)
    assert other.recall(drawn(1)) is None
    assert other.recalled == 1


def test_what_is_found_quickly_is_not_worth_a_file(tmp_path):
    store = CertificateStore(tmp_path)
    store.keep(drawn(0), prove_tu(drawn(0)), seconds=1e-6)
    assert store.recall(drawn(0)) is None


@pytest.mark.parametrize(
    "content",
    [
        b"",
        b"\xff\x00",
        b"[]",
        b"[" * 100_000,
        b'{"schema": "latpath-store/1"}',
        b'{"schema": "latpath-store/1", "structure": "network", "part": {"kind": "network"}}',
        b'{"schema": "latpath-store/1", "structure": "gold", "part": {"kind": "trivial"}}',
        b'{"schema": "latpath-store/1", "structure": "trivial", "part": {"kind": "trivial"}}',
    ],
)
def test_broken_and_forged_entries_are_thrown_away_and_told(tmp_path, caplog, content):
    matrix = drawn(0)
    keep(CertificateStore(tmp_path), matrix)
    [path] = files(tmp_path)
    path.write_bytes(content)
    with caplog.at_level(logging.WARNING, logger="pyomo_latpath.store"):
        assert CertificateStore(tmp_path).recall(matrix) is None
    assert "thrown away" in caplog.text
    assert not path.exists()


@given(st.data())
def test_no_change_of_an_entry_makes_it_prove_what_is_not_so(tmp_path_factory, data):
    folder = tmp_path_factory.mktemp("store")
    matrix = drawn(data.draw(st.integers(0, 50)))
    keep(CertificateStore(folder), matrix)
    [path] = files(folder)
    entry = json.loads(path.read_text())
    lists = [key for key, value in entry["part"].items() if isinstance(value, list) and value]
    rows = entry["part"][data.draw(st.sampled_from(lists))]
    row = data.draw(st.integers(0, len(rows) - 1))
    if isinstance(rows[row], list):
        end = data.draw(st.integers(0, 1))
        rows[row][end] = data.draw(st.integers(-1, 9))
        path.write_text(json.dumps(entry))
    proof = CertificateStore(folder).recall(matrix)
    if proof is not None:
        proof[1].check(matrix)  # another tree may prove the same


def test_an_entry_of_another_matrix_does_not_pass(tmp_path):
    one, other = drawn(0), drawn(1)
    keep(CertificateStore(tmp_path), one)
    [path] = files(tmp_path)
    moved = tmp_path / key_of(other)[:2] / f"{key_of(other)}.json"
    moved.parent.mkdir(exist_ok=True)
    path.rename(moved)
    assert CertificateStore(tmp_path).recall(other) is None
    assert not moved.exists()


def test_those_not_used_for_longest_make_room(tmp_path):
    store = CertificateStore(tmp_path)
    matrices = [drawn(seed) for seed in range(12)]
    for age, matrix in enumerate(matrices):
        keep(store, matrix)
        [path] = tmp_path.glob(f"*/{key_of(matrix)}.json")
        os.utime(path, (1000.0 + age, 1000.0 + age))
    assert CertificateStore(tmp_path).recall(matrices[0]) is not None  # and so in use again
    full = sum(path.stat().st_size for path in files(tmp_path))
    small = CertificateStore(tmp_path, limit=full // 2)
    keep(small, drawn(99))
    left = {path.stem for path in files(tmp_path)}
    assert sum(path.stat().st_size for path in files(tmp_path)) <= full // 2
    assert {key_of(matrices[0]), key_of(drawn(99))} <= left
    assert key_of(matrices[1]) not in left


def test_what_a_killed_process_left_half_written_is_removed(tmp_path):
    keep(CertificateStore(tmp_path), drawn(0))
    old, young = tmp_path / "ab" / ".old.half", tmp_path / "ab" / ".young.half"
    old.parent.mkdir(exist_ok=True)
    old.write_text("{")
    young.write_text("{")
    os.utime(old, (time.time() - 2 * store_module.ABANDONED,) * 2)
    keep(CertificateStore(tmp_path), drawn(1))
    assert not old.exists()
    assert young.exists()


def test_a_path_that_is_a_file_is_refused(tmp_path):
    (tmp_path / "file").write_text("")
    with pytest.raises(ValueError, match="is a file; a store of certificates is a folder"):
        CertificateStore(tmp_path / "file")


def test_a_full_disk_costs_nothing_but_the_saving(tmp_path, caplog, monkeypatch):
    def full(*_, **__):
        raise OSError(errno.ENOSPC, "No space left on device")

    monkeypatch.setattr(store_module.tempfile, "mkstemp", full)
    store = CertificateStore(tmp_path)
    with caplog.at_level(logging.WARNING, logger="pyomo_latpath.store"):
        for seed in range(3):
            keep(store, drawn(seed))
    assert caplog.text.count("keeps nothing more") == 1
    assert store.recall(drawn(0)) is not None  # from memory
    assert not files(tmp_path)


def _write_a_little(folder: Path, told: multiprocessing.Queue) -> None:
    resource.setrlimit(resource.RLIMIT_FSIZE, (64, 64))
    store = CertificateStore(folder)
    keep(store, drawn(0))
    told.put(store.recall(drawn(0)) is not None)


def test_a_write_that_is_cut_off_leaves_nothing(tmp_path):
    context = multiprocessing.get_context("spawn")
    told = context.Queue()
    process = context.Process(target=_write_a_little, args=(tmp_path, told))
    process.start()
    assert told.get(timeout=60)
    process.join(timeout=60)
    assert not list(tmp_path.glob("*/*"))


def _hammer(folder: Path, seed: int, told: multiprocessing.Queue) -> None:
    rng = np.random.default_rng(seed)
    store = CertificateStore(folder, limit=6_000)
    met = 0
    for _ in range(100):
        matrix = drawn(int(rng.integers(30)))
        fresh = CertificateStore(folder, limit=6_000) if rng.random() < 0.5 else store
        proof = fresh.recall(matrix)
        if proof is None:
            keep(fresh, matrix)
        else:
            proof[1].check(matrix)
            met += 1
        if rng.random() < 0.05:  # a vandal
            for path in files(folder)[:1]:
                path.write_bytes(b'{"half')
    told.put(met)


def test_many_processes_at_once(tmp_path):
    context = multiprocessing.get_context("spawn")
    told = context.Queue()
    processes = [context.Process(target=_hammer, args=(tmp_path, k, told)) for k in range(3)]
    for process in processes:
        process.start()
    met = [told.get(timeout=120) for _ in processes]
    for process in processes:
        process.join(timeout=60)
    assert [process.exitcode for process in processes] == [0, 0, 0]
    assert min(met) > 0
    assert not list(tmp_path.glob("*/.*"))
    assert sum(path.stat().st_size for path in files(tmp_path)) <= 4 * 6_000


def hidden_network(seed: int = 3) -> LinearForm:
    """A model whose structure is no plain incidence, so that recognition has to search."""
    matrix = drawn(seed, "network", 12, 30)
    return LinearForm.from_arrays(
        matrix, row_lower=-9, row_upper=9, col_lower=0, col_upper=1, cost=-1
    )


def test_a_solve_asks_the_store_before_it_searches(tmp_path, monkeypatch):
    monkeypatch.setattr(store_module, "WORTH_KEEPING", 0.0)
    form = hidden_network()
    first = solve(form, store=CertificateStore(tmp_path))
    assert first.report.recognition == "found"
    assert files(tmp_path)
    monkeypatch.setattr("pyomo_latpath.integrality.certify.prove_tu", None)  # no search, now
    again = LinearForm.from_arrays(
        form.matrix, row_lower=-9, row_upper=7, col_lower=0, col_upper=2, cost=-2
    )
    second = solve(again, store=CertificateStore(tmp_path))
    assert second.report.recognition == "stored"
    assert second.report.finding.verdict == "proven"
    assert second.report.finding.structures == first.report.finding.structures


def test_a_forged_entry_changes_no_answer(tmp_path, monkeypatch):
    monkeypatch.setattr(store_module, "WORTH_KEEPING", 0.0)
    odd = LinearForm.from_arrays(
        [[1, 1, 0], [0, 1, 1], [1, 0, 1]], row_lower=0, row_upper=1, col_lower=0, col_upper=1,
        cost=-1,
    )  # fmt: skip
    matrix = sp.csc_array(odd.matrix.astype(np.int64))
    path = tmp_path / key_of(matrix)[:2] / f"{key_of(matrix)}.json"
    path.parent.mkdir()
    part = {"kind": "network", "tree": [[1, 0], [2, 0], [3, 0]], "arcs": [[1, 0], [2, 0], [3, 0]]}
    path.write_text(
        json.dumps({"schema": store_module.SCHEMA, "structure": "network", "part": part})
    )
    solution = solve(odd, store=CertificateStore(tmp_path))
    assert solution.objective == -1.0
    assert solution.report.finding.verdict == "refuted"
    assert not path.exists()
