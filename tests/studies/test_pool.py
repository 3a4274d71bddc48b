"""Worker processes: results in any number of workers, and what the death of one costs.

Outside reference: Python's own arithmetic; signal(7) for how a process ended.
"""

import pytest
import tasks

from transim.errors import EngineNotFound, StudyError
from transim.study.pool import ATTEMPTS, LocalPool, Lost


def run(function, common, arguments, workers=2):
    with LocalPool(function, common, workers) as pool:
        found = list(pool.run((argument, argument) for argument in arguments))
    keys = [finished.key for finished in found]
    assert sorted(keys) == sorted(arguments)
    return {finished.key: finished.result for finished in found}


@pytest.mark.parametrize("workers", [1, 3])
def test_every_task_once_whatever_the_number_of_workers(workers):
    assert run(tasks.slow_square, {"offset": 5}, range(40), workers) == {k: 5 + k * k for k in range(40)}


def test_no_task_is_taken_before_the_last_result_was_seen():
    taken, seen = [], []

    def source():
        for k in range(30):
            taken.append(k)
            # with n workers, at most n tasks are beyond those whose results were handled
            assert len(taken) - len(seen) <= 2
            yield k, k

    with LocalPool(tasks.square, {"offset": 0}, 2) as pool:
        seen.extend(finished.key for finished in pool.run(source()))
    assert sorted(seen) == list(range(30))


def test_dead_workers_cost_nothing_but_time(tmp_path):
    common = {"folder": str(tmp_path), "deadly": {0, 7, 8, 19}}
    assert run(tasks.dies_once, common, range(20)) == {k: k * k for k in range(20)}


def test_a_task_that_kills_its_workers_is_given_up():
    found = run(tasks.always_dies, {"deadly": {3}}, range(8))
    lost = found.pop(3)
    assert isinstance(lost, Lost)
    assert f"died {ATTEMPTS} times" in lost.reason
    assert "SIGKILL" in lost.reason
    assert found == {k: k * k for k in range(8) if k != 3}


def test_an_unexpected_error_is_of_its_own_task_only():
    found = run(tasks.breaks, {"break_at": 2}, range(6))
    assert found.pop(2) == Lost("unexpected ZeroDivisionError: no such value")
    assert len(found) == 5


def test_what_concerns_every_task_ends_the_study():
    with pytest.raises(EngineNotFound, match="no ngspice here"):
        run(tasks.stops, {"stop_at": 4}, range(10))


def test_workers_that_cannot_start_are_said_so():
    with pytest.raises(StudyError, match="end as soon as they are started, by exit status 7"):
        run(tasks.square, tasks.Stillborn(), range(10))


def test_workers_use_one_thread_each():
    assert run(tasks.threads, None, range(2)) == {0: ("1", "1"), 1: ("1", "1")}
