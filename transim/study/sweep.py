"""Sweep: one or two parameters stepped through, and where all limits hold."""

from __future__ import annotations

import itertools
from dataclasses import asdict, dataclass

import numpy as np
import numpy.typing as npt

from transim.design.model import Design
from transim.design.studies import Sweep
from transim.study.plan import Plan, chosen_drivers, full_run
from transim.study.run import Outcome
from transim.study.study import Advance, Study
from transim.study.table import Table, collect

__all__ = ["SweepOutcome", "run_sweep"]


@dataclass(frozen=True)
class SweepOutcome:
    """What a sweep gave.

    Attributes
    ----------
    design : Design
        At its nominal values.
    sweep : Sweep
        What was swept.
    drivers : tuple of str
        What was run.
    table : Table
        All points; the last axis runs fastest.
    nominal : Outcome
        The design at its nominal values, with every check.
    best : Outcome or None
        The point of the largest smallest margin, with every check.
    best_place : int or None
        Which one it is in the table.
    advance : Advance
        How many points, how fast, how many failed.
    """

    design: Design
    sweep: Sweep
    drivers: tuple[str, ...]
    table: Table
    nominal: Outcome
    best: Outcome | None
    best_place: int | None
    advance: Advance

    @property
    def shape(self) -> tuple[int, ...]:
        """Number of values along each axis."""
        return tuple(len(axis.values) for axis in self.sweep.axes)

    @property
    def feasible(self) -> npt.NDArray[np.bool_]:
        """Whether all limits hold, by axes and then drivers."""
        table = self.table
        columns = [[c for c, case in enumerate(table.cases) if case.driver == driver] for driver in self.drivers]
        good = [table.case_good[:, some].all(axis=1) & ~table.failed if some else table.good for some in columns]
        return np.stack(good, axis=1).reshape(*self.shape, len(self.drivers))


def run_sweep(design: Design, sweep: Sweep, plan: Plan) -> SweepOutcome:
    """Run a sweep, or go on with it.

    Parameters
    ----------
    design : Design
        Read and checked.
    sweep : Sweep
        What to step through.
    plan : Plan
        Where and how.

    Returns
    -------
    SweepOutcome
        The study's folder also holds it as `arrays.npz` and `table.csv`.

    Raises
    ------
    DesignError
        If parameters and drivers do not fit together.
    EngineError
        If the nominal design cannot be simulated.
    StudyError, OutputError
        If the study cannot be kept or gone on with.
    """
    parameters = tuple(axis.parameter for axis in sweep.axes)
    drivers = chosen_drivers(design, sweep.drivers, parameters)
    setup = plan.setup(design, parameters, drivers)
    definition = {"axes": [asdict(axis) for axis in sweep.axes]}
    with Study("sweep", setup, definition, plan.engine, plan.place, plan.workers, plan.advanced) as study:
        nominal = full_run(plan, setup, None, "the nominal design")
        points = {
            ",".join(map(str, index)): tuple(axis.values[k] for axis, k in zip(sweep.axes, index, strict=True))
            for index in itertools.product(*(range(len(axis.values)) for axis in sweep.axes))
        }
        study.complete(points.items())
        table = collect(study.points(), list(points), parameters, [axis.unit for axis in sweep.axes])
        shape = [len(axis.values) for axis in sweep.axes]
        axes = {axis.parameter: np.array(axis.values) for axis in sweep.axes}
        table.write_arrays(plan.place.folder / "arrays.npz", shape, axes)
        table.write_csv(plan.place.folder / "table.csv")
        place = best = None
        if np.isfinite(table.margin).any():
            place = int(np.nanargmax(table.margin))
            best = full_run(plan, setup, tuple(table.values[place].tolist()), "the best point, with every check")
        return SweepOutcome(design, sweep, drivers, table, nominal, best, place, study.advance)
