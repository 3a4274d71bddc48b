"""A study: points that are simulated once, wherever there are workers, and kept as they come."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from types import TracebackType
from typing import Any

from transim.engine.ngspice import Engine
from transim.study.point import Point, Setup, failed_point, simulate_point
from transim.study.pool import LocalPool, Lost, Pool
from transim.study.store import Store, study_key, write_whole

__all__ = ["Advance", "Advanced", "Place", "Study", "Workers"]


@dataclass(frozen=True)
class Workers:
    """Where points are simulated.

    Attributes
    ----------
    count : int or None
        Processes on this machine; None: one a processor.
    cluster : str or None
        Address of a Dask scheduler, in place of them.
    """

    count: int | None = None
    cluster: str | None = None


@dataclass(frozen=True)
class Place:
    """Where a study keeps its points, and what it may find there.

    Attributes
    ----------
    folder : Path
        The folder.
    resume, force : bool
        Whether there must be a study to go on with; whether another one's points may be discarded.
    """

    folder: Path
    resume: bool = False
    force: bool = False


@dataclass(frozen=True)
class Advance:
    """How far a study is.

    Attributes
    ----------
    done, total : int
        Points that are finished, and all that are wanted so far.
    failed : int
        Finished ones without figures.
    reused : int
        Those of `done` that were on disk before.
    seconds : float
        Since the start [s].
    """

    done: int
    total: int
    failed: int
    reused: int
    seconds: float

    @property
    def rate(self) -> float:
        """New points in a second [1/s]."""
        return (self.done - self.reused) / self.seconds if self.seconds > 0.0 else 0.0

    @property
    def left(self) -> float | None:
        """Expected time to the end [s], None before it can be told."""
        return (self.total - self.done) / self.rate if self.rate > 0.0 else None


Advanced = Callable[[Advance], None]


class Study:
    """Simulates points, each once, and keeps them.

    Used as a context manager.

    Parameters
    ----------
    kind : str
        ``sweep``, ``tune`` or ``spread``.
    setup : Setup
        What all points have in common.
    definition : mapping
        What is done; with `setup`, it tells this study from others. Of what JSON has.
    engine : Engine
        ngspice, which every worker must have in the same version.
    place : Place
        Where the points are kept.
    workers : Workers
        Where they are simulated.
    """

    def __init__(
        self,
        kind: str,
        setup: Setup,
        definition: Mapping[str, Any],
        engine: Engine,
        place: Place,
        workers: Workers = Workers(),
        advanced: Advanced | None = None,
    ) -> None:
        self.setup = setup
        self.kind = kind
        self.key = study_key(kind, setup, definition, engine.version)
        description = {
            "kind": kind,
            "design": setup.design.source.path.name,
            "title": setup.design.title,
            "engine": f"ngspice {engine.version}",
            "parameters": list(setup.parameters),
            "drivers": list(setup.drivers),
            "analysis": setup.analysis,
            "checks": "the envelope is compared with ngspice's AC analysis at the start of every point, and at four"
            " biases of the nominal design and of the reported ones",
            **definition,
        }
        self.store = Store(place.folder, self.key, description, resume=place.resume, force=place.force)
        self._workers = workers
        self._pool: Pool | None = None
        self._advanced = advanced
        self._started = time.monotonic()
        self._done = self._total = self._failed = self._reused = 0

    def __enter__(self) -> Study:
        self.store.__enter__()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        try:
            if self._pool is not None:
                self._pool.__exit__(kind, error, trace)
        finally:
            self.store.__exit__(kind, error, trace)

    @property
    def advance(self) -> Advance:
        """How far the study is."""
        return Advance(self._done, self._total, self._failed, self._reused, time.monotonic() - self._started)

    def complete(self, wanted: Iterable[tuple[str, tuple[float, ...]]]) -> None:
        """Simulate what is not on disk yet.

        Parameters
        ----------
        wanted : iterable of (str, tuple of float)
            Place and values of each point.

        Raises
        ------
        EngineNotFound, OutputError, StudyError
            If nothing more can be simulated or kept; what is finished stays.
        """
        wanted = list(wanted)
        present = self.store.places()
        values = {place: point for place, point in wanted if place not in present}
        reused = len(wanted) - len(values)
        self._total += len(wanted)
        self._done += reused
        self._reused += reused
        if reused and self._failed == 0:
            self._failed = self.store.failures()
        self._tell()
        if not values:
            return
        for finished in self._running().run(values.items()):
            place = str(finished.key)
            result = finished.result
            point = failed_point(values[place], result.reason) if isinstance(result, Lost) else result
            self.store.add(place, point)
            self._keep_failure(place, point)
            self._done += 1
            self._failed += point.reason is not None
            self._tell()

    def points(self) -> Iterator[tuple[str, Point]]:
        """Read every finished point, one at a time.

        Yields
        ------
        tuple of str and Point
            Place and point.
        """
        return self.store.points()

    def _running(self) -> Pool:
        if self._pool is None:
            pool: Pool
            if self._workers.cluster is None:
                pool = LocalPool(simulate_point, self.setup, self._workers.count)
            else:
                from transim.study.cluster import ClusterPool

                pool = ClusterPool(simulate_point, self.setup, self._workers.cluster, self.key[:16])
            self._pool = pool.__enter__()
        return self._pool

    def _keep_failure(self, place: str, point: Point) -> None:
        """Write the deck of a failed point where its user can run it."""
        if point.deck is None:
            return
        folder = self.store.folder / "failed"
        folder.mkdir(exist_ok=True)
        write_whole(folder / f"{place}.cir", point.deck)
        if point.log is not None:
            write_whole(folder / f"{place}.log", f"{point.reason}\n{point.log}\n")

    def _tell(self) -> None:
        if self._advanced is not None:
            self._advanced(self.advance)
