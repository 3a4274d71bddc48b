"""A Dask scheduler and two workers over TCP, each a process of its own, as a user would start them."""

import contextlib
import os
import signal
import socket
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest
import tasks
from pole import DESIGN, PART

from transim.design.studies import Sweep
from transim.design.toml import read_design
from transim.design.vary import study_of
from transim.engine import find_engine
from transim.errors import StudyError
from transim.study.cluster import ClusterPool
from transim.study.plan import Plan
from transim.study.study import Place, Workers
from transim.study.sweep import run_sweep


def free_port():
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return probe.getsockname()[1]


@pytest.fixture
def cluster(tmp_path):
    """Return the address of the scheduler, and the processes of its workers."""
    address = f"tcp://127.0.0.1:{free_port()}"
    started = []

    def start(*words):
        process = subprocess.Popen(
            [sys.executable, "-m", "distributed.cli." + words[0], *words[1:]],
            cwd=tmp_path,
            stdout=subprocess.DEVNULL,
            stderr=subprocess.DEVNULL,
            start_new_session=True,
        )
        started.append(process)
        return process

    start("dask_scheduler", "--host", "127.0.0.1", "--port", address.rpartition(":")[2], "--no-dashboard")
    worker = ("dask_worker", address, "--nthreads", "1", "--no-nanny", "--no-dashboard", "--host", "127.0.0.1")
    workers = [start(*worker) for _ in range(2)]
    yield address, workers
    for process in started:
        with contextlib.suppress(ProcessLookupError):
            os.killpg(process.pid, signal.SIGKILL)
        process.wait()


def test_a_cluster_gives_what_one_process_gives(cluster):
    address, _ = cluster
    with ClusterPool(tasks.slow_square, {"offset": 2}, address, "plain") as pool:
        found = {finished.key: finished.result for finished in pool.run((str(k), k) for k in range(25))}
    assert found == {str(k): 2 + k * k for k in range(25)}


def test_a_worker_killed_in_the_middle_costs_nothing(cluster):
    address, workers = cluster
    found = []
    with ClusterPool(tasks.slow_square, {"offset": 0}, address, "killed") as pool:
        pool._client.wait_for_workers(2, timeout=30)
        for finished in pool.run((str(k), k) for k in range(60)):
            found.append((finished.key, finished.result))
            if len(found) == 20:
                os.kill(workers[0].pid, signal.SIGKILL)
    assert workers[0].wait(5) == -signal.SIGKILL
    assert sorted(found) == sorted((str(k), k * k) for k in range(60))


def test_a_scheduler_that_is_not_there(monkeypatch):
    monkeypatch.setattr("transim.study.cluster._PATIENCE", 1.0)
    start = time.monotonic()
    with (
        pytest.raises(StudyError, match="no Dask scheduler answers at tcp:"),
        ClusterPool(tasks.square, {}, f"tcp://127.0.0.1:{free_port()}", "none"),
    ):
        pass
    assert time.monotonic() - start < 20.0


def test_a_study_that_loses_a_worker_ends_complete_and_equal(cluster, tmp_path, monkeypatch):
    address, workers = cluster
    monkeypatch.chdir(tmp_path)
    Path("pole_gate.cir").write_text(PART)
    Path("pole.toml").write_text(DESIGN.replace("LIMIT", "250 ns"))
    design, engine = read_design("pole.toml"), find_engine()
    sweep = study_of(design, Sweep, ["switch.resistance = 500 ohm .. 2 kohm, linear 40"])

    def kill(advance):
        if advance.done == 12:
            os.kill(workers[1].pid, signal.SIGKILL)

    outcomes = {}
    for name, where, told in (("here", Workers(2), None), ("there", Workers(cluster=address), kill)):
        plan = Plan(engine, Place(tmp_path / name), where, advanced=told)
        outcomes[name] = run_sweep(design, sweep, plan)
    assert workers[1].wait(5) == -signal.SIGKILL
    here, there = outcomes["here"].table, outcomes["there"].table
    assert here.places == there.places
    assert not there.failed.any()
    assert len(here.places) == 40
    # bit for bit
    for name, values in here.figures.items():
        assert np.array_equal(values, there.figures[name], equal_nan=True), name
    assert (tmp_path / "here" / "table.csv").read_bytes() == (tmp_path / "there" / "table.csv").read_bytes()
