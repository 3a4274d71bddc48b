"""Worker processes on this machine: one task each at a time, and none is lost when a worker dies.

The parent knows which task each worker has. It hands out the next one only after the caller has taken the last
result, so that a caller who writes results down as they come loses at most what was being computed.
"""

from __future__ import annotations

import contextlib
import multiprocessing
import os
import signal
import sys
import time
from collections import deque
from collections.abc import Callable, Hashable, Iterable, Iterator
from dataclasses import dataclass
from multiprocessing.connection import Connection, wait
from multiprocessing.context import ForkServerContext, SpawnContext
from multiprocessing.process import BaseProcess
from types import TracebackType
from typing import Any, Protocol

from transim.errors import StudyError, TransimError

__all__ = ["ATTEMPTS", "Finished", "LocalPool", "Lost", "Pool", "processors"]

#: A task whose worker has died this many times is given up.
ATTEMPTS = 3
#: Workers end within this time when they are told to, or are killed [s].
_GRACE = 3.0
_SINGLE = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS")

Function = Callable[[Any, Any], Any]


@dataclass(frozen=True)
class Lost:
    """What stands for the result of a task whose workers died.

    Attributes
    ----------
    reason : str
        How they ended.
    """

    reason: str


@dataclass(frozen=True)
class Finished:
    """A task that is done.

    Attributes
    ----------
    key : hashable
        Its key.
    result : object
        What the function returned, or `Lost`.
    """

    key: Hashable
    result: Any


class Pool(Protocol):
    """What computes tasks: worker processes here, or a cluster."""

    def run(self, tasks: Iterable[tuple[Hashable, Any]]) -> Iterator[Finished]:
        """Compute tasks, given as key and argument, and yield each as it is done, in any order."""

    def __enter__(self) -> Pool:
        """Start."""

    def __exit__(self, kind: Any, error: Any, trace: Any) -> None:
        """End, whatever is still being computed."""


def processors() -> int:
    """Return how many processors this process may use."""
    with contextlib.suppress(AttributeError):
        return max(1, len(os.sched_getaffinity(0)))
    return os.cpu_count() or 1


class LocalPool:
    """Worker processes on this machine.

    Used as a context manager; workers start with the first tasks and serve until the end.

    Parameters
    ----------
    function : callable
        Takes `common` and an argument, returns the result; all of them can be pickled.
    common : object
        Sent to each worker once.
    workers : int or None
        How many; None: one a processor.
    """

    def __init__(self, function: Function, common: Any, workers: int | None = None) -> None:
        self._function, self._common = function, common
        self.workers = workers or processors()
        self._context = _context()
        self._serving: list[_Worker] = []
        self._stillborn = 0

    def __enter__(self) -> LocalPool:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        for worker in self._serving:
            worker.ask_to_end()
        deadline = time.monotonic() + _GRACE
        for worker in self._serving:
            worker.end(deadline)
        self._serving.clear()

    def run(self, tasks: Iterable[tuple[Hashable, Any]]) -> Iterator[Finished]:
        """Compute tasks.

        Parameters
        ----------
        tasks : iterable of (hashable, object)
            Key and argument; taken one by one, as workers become free.

        Yields
        ------
        Finished
            In the order in which they are done.

        Raises
        ------
        TransimError
            If the function raises one: its result is not a matter of this task alone.
        StudyError
            If workers die before they are ready for anything.
        """
        source = iter(tasks)
        again: deque[_Task] = deque()
        while True:
            self._supply(source, again)
            busy = [worker for worker in self._serving if worker.task is not None]
            if not busy:
                return
            for worker in _ready(busy):
                task = worker.task
                assert task is not None
                try:
                    result = worker.result()
                except EOFError:
                    self._serving.remove(worker)
                    finished = self._died(worker, task, again)
                    if finished is not None:
                        yield finished
                    continue
                if result is None:
                    continue
                if isinstance(result, TransimError):
                    raise result
                # the caller writes it down before this worker gets its next task
                yield Finished(task.key, result)
                self._supply(source, again)

    def _died(self, worker: _Worker, task: _Task, again: deque[_Task]) -> Finished | None:
        """Put the task of a dead worker back, or give it up."""
        code = worker.process.exitcode
        how = f"signal {signal.Signals(-code).name}" if code is not None and code < 0 else f"exit status {code}"
        if not worker.ready:
            self._stillborn += 1
            if self._stillborn >= ATTEMPTS:
                raise StudyError(f"worker processes end as soon as they are started, by {how}")
            again.append(task)
            return None
        task.deaths += 1
        if task.deaths < ATTEMPTS:
            again.append(task)
            return None
        return Finished(task.key, Lost(f"the worker died {task.deaths} times at this point, the last time by {how}"))

    def _supply(self, source: Iterator[tuple[Hashable, Any]], again: deque[_Task]) -> None:
        """Give every free worker a task, those first that have been lost, and start the workers that are missing."""
        while True:
            free = next((worker for worker in self._serving if worker.task is None), None)
            if free is None and len(self._serving) >= self.workers:
                return
            if again:
                task = again.popleft()
            else:
                try:
                    task = _Task(*next(source))
                except StopIteration:
                    return
            if free is None:
                free = _Worker(self._context, self._function, self._common)
                self._serving.append(free)
            free.give(task)


@dataclass
class _Task:
    key: Hashable
    argument: Any
    deaths: int = 0


class _Worker:
    """A process, the pipe to it, and the task that it has."""

    def __init__(self, context: ForkServerContext | SpawnContext, function: Function, common: Any) -> None:
        self.task: _Task | None = None
        self.ready = False
        self.pipe, far = context.Pipe()
        with _single_threaded():
            self.process: BaseProcess = context.Process(target=_serve, args=(far, function, common), daemon=True)
            self.process.start()
        # the worker has the only other end, so that the death of either is seen by the other
        far.close()

    def give(self, task: _Task) -> None:
        self.task = task
        with contextlib.suppress(OSError):
            # a worker that has died is noticed where its result is read
            self.pipe.send(task.argument)

    def result(self) -> Any:
        try:
            result = self.pipe.recv()
        except (OSError, EOFError) as exc:
            self.pipe.close()
            self.process.join(_GRACE)
            raise EOFError from exc
        if not self.ready:
            # the first thing that a worker says is that it is there
            self.ready = True
            return None
        self.task = None
        return result

    def ask_to_end(self) -> None:
        with contextlib.suppress(OSError, ValueError):
            if self.task is None:
                self.pipe.close()
            else:
                self.process.terminate()

    def end(self, deadline: float) -> None:
        self.process.join(max(0.0, deadline - time.monotonic()))
        if self.process.exitcode is None:
            self.process.kill()
            self.process.join()
        with contextlib.suppress(OSError):
            self.pipe.close()


def _ready(busy: list[_Worker]) -> list[_Worker]:
    pipes = {worker.pipe: worker for worker in busy}
    return [pipes[pipe] for pipe in wait(list(pipes)) if isinstance(pipe, Connection)]


def _context() -> ForkServerContext | SpawnContext:
    """Return how processes are started: never by copying this one, whose threads would not survive it."""
    if "forkserver" in multiprocessing.get_all_start_methods():
        context = multiprocessing.get_context("forkserver")
        context.set_forkserver_preload(["transim.study.point"])
        return context
    return multiprocessing.get_context("spawn")


@contextlib.contextmanager
def _single_threaded() -> Iterator[None]:
    """Let what is started now use one thread for linear algebra: there is one worker a processor already."""
    before = {name: os.environ.get(name) for name in _SINGLE}
    os.environ.update(dict.fromkeys(_SINGLE, "1"))
    try:
        yield
    finally:
        for name, value in before.items():
            if value is None:
                os.environ.pop(name, None)
            else:
                os.environ[name] = value


def _serve(pipe: Connection, function: Function, common: Any) -> None:
    """Compute until the pipe is closed; what a worker does."""
    # Ctrl-C reaches the whole group, and the parent decides what it means
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    signal.signal(signal.SIGTERM, lambda _number, _frame: sys.exit(143))
    with contextlib.suppress(OSError):
        pipe.send(None)
    while True:
        try:
            argument = pipe.recv()
        except (EOFError, OSError):
            return
        try:
            result = function(common, argument)
        except TransimError as exc:
            result = exc
        except Exception as exc:  # noqa: BLE001 - whatever goes wrong at one point must not end the study
            result = Lost(f"unexpected {type(exc).__name__}: {exc}")
        try:
            pipe.send(result)
        except OSError:
            return
