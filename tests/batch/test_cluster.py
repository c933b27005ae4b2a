"""A Dask cluster as a crew: a real scheduler, and workers that die."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import odd_instances as odd
import pytest
from click.testing import CliRunner

from pyomo_latpath import cli
from pyomo_latpath.batch import cluster
from pyomo_latpath.batch.crew import BatchError
from pyomo_latpath.batch.journal import Journal
from pyomo_latpath.batch.runner import Tasks, run
from pyomo_latpath.batch.task import Settings

pytest.importorskip("distributed")


def address_in(file: Path) -> str | None:
    """The scheduler's address, once its file is written to the end."""
    try:
        return json.loads(file.read_text())["address"]
    except (FileNotFoundError, json.JSONDecodeError):
        return None


@pytest.fixture(scope="module")
def address(tmp_path_factory):
    """A scheduler and two workers on the loopback, each a process of its own."""
    place = tmp_path_factory.mktemp("cluster")
    file = place / "scheduler.json"
    log = (place / "log").open("w")
    common = ["--scheduler-file", str(file), "--no-dashboard"]
    dask = [sys.executable, "-m", "dask"]
    path = os.pathsep.join([str(Path(odd.__file__).parent), os.environ.get("PYTHONPATH", "")])
    here = {"cwd": place, "stdout": log, "stderr": log, "env": os.environ | {"PYTHONPATH": path}}
    started = [
        subprocess.Popen(
            [*dask, "scheduler", "--host", "127.0.0.1", "--port", "0", *common], **here
        )
    ]
    try:
        while not (where := address_in(file)):
            assert started[0].poll() is None, (place / "log").read_text()
            time.sleep(0.05)
        ways = ["--nthreads", "1", "--no-nanny", "--host", "127.0.0.1"]
        started += [subprocess.Popen([*dask, "worker", *common, *ways], **here) for _ in range(2)]
        yield where, started[1:]
    finally:
        for process in reversed(started):
            process.kill()
            process.wait()
        log.close()


def test_a_worker_that_dies_costs_no_record_and_doubles_none(address, tmp_path):
    where, workers = address
    log = tmp_path / "log"
    instances = [odd.Quick(f"quick {k}", str(log)) for k in range(150)]
    instances += [odd.Faulty("faulty"), odd.Hungry("hungry")]
    tasks = Tasks(instances, Settings(time_limit=60))
    path = tmp_path / "journal.jsonl"
    found = []
    with cluster.Cluster(where) as here, Journal(path, tasks.settings.plain()) as journal:
        here.client.wait_for_workers(2, timeout=120)
        for done in run(tasks, here.crew(), journal):
            found.append(done.record)
            if len(found) == 20:
                workers[0].send_signal(signal.SIGKILL)
        assert list(journal.records()) == found
    assert len(found) == len({record.instance for record in found}) == len(instances)
    assert sum(record.solved for record in found) == 150
    by_name = {record.instance: record for record in found}
    assert "RuntimeError: a wheel came off" in by_name["faulty"].error
    assert by_name["hungry"].error.startswith("it ran out of memory")


def test_the_command_works_on_it_as_well(address, tmp_path):
    where, _ = address
    (tmp_path / "days").mkdir()
    for k in range(5):
        (tmp_path / "days" / f"day{k}.min").write_text(odd.FLOW)
    out = tmp_path / "out"
    arguments = ["batch", str(tmp_path / "days"), "--out", str(out), "--cluster", where, "--plans"]
    result = CliRunner().invoke(cli.main, arguments)
    assert result.exit_code == 0, result.output
    assert "5 instances: 5 optimal" in result.output
    assert len(list((out / "plans").iterdir())) == 5


def test_a_cluster_that_is_not_there_is_named(monkeypatch, tmp_path):
    monkeypatch.setattr(cluster, "PATIENCE", 0.5)
    with pytest.raises(BatchError, match=r"no Dask scheduler answers at tcp://127\.0\.0\.1:9"):
        cluster.Cluster("tcp://127.0.0.1:9")
