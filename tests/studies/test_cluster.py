"""A Dask scheduler and two workers over TCP, each a process of its own, as a user would start them."""

import contextlib
import os
import signal
import socket
import subprocess
import sys
import time

import pytest
import tasks

from transim.errors import StudyError
from transim.study.cluster import ClusterPool


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
        pytest.raises(StudyError, match="no Dask scheduler answers at tcp://127.0.0.1"),
        ClusterPool(tasks.square, {}, f"tcp://127.0.0.1:{free_port()}", "none"),
    ):
        pass
    assert time.monotonic() - start < 20.0
