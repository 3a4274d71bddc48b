"""Workers of a Dask cluster that is running already, in place of processes on this machine."""

from __future__ import annotations

import pickle
from collections.abc import Hashable, Iterable, Iterator
from functools import lru_cache
from types import TracebackType
from typing import Any

from transim import __version__
from transim.errors import StudyError, TransimError
from transim.study.pool import Finished, Function, Lost

__all__ = ["ClusterPool"]

#: Time to reach the scheduler, and for its first worker to be there [s].
_PATIENCE = 20.0
#: Tasks in flight for each thread of the cluster: one is computed while the next is on its way.
_AHEAD = 2


class ClusterPool:
    """Workers of a running cluster.

    Used as a context manager. A worker that dies loses what it was computing, which the scheduler hands to another.

    Parameters
    ----------
    function : callable
        Takes `common` and an argument, returns the result; a pure function that the workers can import.
    common : object
        The same for all tasks.
    address : str
        Of the scheduler, for example ``tcp://10.0.0.1:8786``.
    name : str
        Tells the tasks of this study from others.

    Raises
    ------
    StudyError
        On entry where dask.distributed is not installed, the scheduler cannot be reached, there are no workers, or
        they have another version of transim.
    """

    def __init__(self, function: Function, common: Any, address: str, name: str) -> None:
        self._function, self._common = function, pickle.dumps(common)
        self._address, self._name = address, name

    def __enter__(self) -> ClusterPool:
        try:
            from distributed import Client
        except ImportError as exc:
            raise StudyError(
                "--cluster needs dask.distributed, which is not installed: pip install 'transim[cluster]'"
            ) from exc
        try:
            self._client = Client(self._address, timeout=_PATIENCE, set_as_default=False)
        except (OSError, TimeoutError, ValueError) as exc:
            raise StudyError(
                f"no Dask scheduler answers at {self._address} ({exc}); start one, or leave out --cluster"
            ) from exc
        try:
            self._client.wait_for_workers(1, timeout=_PATIENCE)
            versions = set(self._client.run(_version).values())
        except (OSError, TimeoutError) as exc:
            self._client.close()
            raise StudyError(f"the scheduler at {self._address} has no workers; start some with dask worker") from exc
        if versions != {__version__}:
            self._client.close()
            raise StudyError(
                f"the workers have transim {', '.join(sorted(versions))}, and this is {__version__}: results would"
                " not be the same"
            )
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        # what is still in flight is given back, so that the cluster does not compute for nobody
        self._client.close()

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
            If the function raises one.
        StudyError
            If the scheduler is lost.
        """
        from distributed import as_completed

        source = iter(tasks)
        keys: dict[str, Hashable] = {}
        arriving = as_completed(loop=self._client.loop)

        def supply() -> None:
            threads = sum(
                worker["nthreads"] for worker in self._client.scheduler_info(n_workers=-1)["workers"].values()
            )
            while len(keys) < max(2, _AHEAD * threads):
                try:
                    key, argument = next(source)
                except StopIteration:
                    return
                name = f"transim-{self._name}-{key}"
                keys[name] = key
                arriving.add(self._client.submit(_compute, self._function, self._common, argument, key=name, pure=True))

        supply()
        while keys:
            future = next(arriving)
            key = keys.pop(future.key)
            yield Finished(key, self._result(future))
            supply()

    def _result(self, future: Any) -> Any:
        if future.status == "finished":
            return future.result()
        error = future.exception() if future.status == "error" else None
        if error is None:
            raise StudyError(f"the scheduler at {self._address} was lost ({future.status}); finished points are kept")
        if isinstance(error, TransimError):
            raise error
        if type(error).__name__ == "KilledWorker":
            return Lost("the cluster's workers died at this point, one after the other")
        return Lost(f"unexpected {type(error).__name__}: {error}")


def _compute(function: Function, common: bytes, argument: Any) -> Any:
    return function(_unpacked(common), argument)


@lru_cache(maxsize=4)
def _unpacked(common: bytes) -> Any:
    return pickle.loads(common)


def _version() -> str:
    return __version__
