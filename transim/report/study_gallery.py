"""The figures of a sweep, a tuning or a spread: which there are, and where each is written."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from transim.design.model import Design
from transim.measure.metrics import METRICS
from transim.quantities import format_quantity
from transim.report.output import ResultFolder
from transim.report.study_figures import (
    Bounds,
    Quantity,
    Window,
    spread_figure,
    sweep_figure,
    sweep_map_figure,
    tune_figure,
)
from transim.report.style import save_figure
from transim.study.run import Outcome
from transim.study.spread import SpreadOutcome
from transim.study.sweep import SweepOutcome
from transim.study.table import CaseLabel, Table
from transim.study.tune import TuneOutcome

if TYPE_CHECKING:
    from matplotlib.figure import Figure

__all__ = ["spread_figures", "sweep_figures", "tune_figures", "write_study_figures"]

Array = npt.NDArray[np.float64]
Figures = Iterator[tuple[str, "Figure"]]

#: What is drawn where the design limits nothing.
_USUAL = ("on_time", "off_time", "video_peak")


def write_study_figures(folder: Path, figures: Iterable[tuple[str, Figure]]) -> None:
    """Write figures as PNG and as SVG, in place of those of an earlier call.

    Parameters
    ----------
    folder : Path
        Where they go; other files in it stay.
    figures : iterable of (str, Figure)
        Name without suffix, and figure.

    Raises
    ------
    OutputError
        If the folder cannot be written, or a file that is not transim's own is in the way.
    """
    with ResultFolder(folder, force=True) as place:
        for name, figure in figures:
            save_figure(figure, place / name)


def sweep_figures(outcome: SweepOutcome) -> Figures:
    """Draw a sweep: curves over one parameter, or maps over two with the feasible region.

    Parameters
    ----------
    outcome : SweepOutcome
        The sweep.

    Yields
    ------
    str, Figure
        One parameter: a figure for each metric with a limit, a line for each case. Two: for each driver a map of
        the smallest margin and of each metric with a limit, at its worst case.
    """
    title, table, axes = outcome.design.title, outcome.table, outcome.sweep.axes
    orders = [np.argsort(axis.values) for axis in axes]
    sides = [
        Quantity(axis.parameter, axis.unit, np.array(axis.values)[order])
        for axis, order in zip(axes, orders, strict=True)
    ]
    if len(axes) == 1:
        for limit in _shown(outcome.design, table):
            values = table.figures[limit.metric][orders[0]]
            unit = METRICS[limit.metric].unit
            names = _names(table.cases)
            curves = [Quantity(name, unit, values[:, k]) for k, name in enumerate(names)]
            yield limit.metric, sweep_figure(title, sides[0], limit.metric, curves, Bounds(limit.min, limit.max))
        return
    grid = np.ix_(*orders)
    for number, driver in enumerate(outcome.drivers):
        columns = [k for k, case in enumerate(table.cases) if case.driver == driver]
        if not columns:
            continue
        feasible = outcome.feasible[..., number][grid].T
        wanted = [("margin", "1", table.case_margin[:, columns].min(axis=1))]
        wanted += [
            (limit.metric, METRICS[limit.metric].unit, _worst(table.figures[limit.metric][:, columns], limit))
            for limit in _shown(outcome.design, table)
        ]
        for metric, unit, values in wanted:
            z = Quantity(f"{metric} of {driver}", unit, values.reshape(outcome.shape)[grid].T)
            yield f"{driver}_{metric}", sweep_map_figure(title, sides[0], sides[1], z, feasible)


def tune_figures(outcome: TuneOutcome) -> Figures:
    """Draw the windows of a tuning.

    Parameters
    ----------
    outcome : TuneOutcome
        The tuning.

    Yields
    ------
    str, Figure
        One, or none where no point could be simulated.
    """
    if outcome.best is None:
        return
    found = {window.parameter: (window.low, window.high) for window in outcome.windows}
    windows = [
        Window(axis.parameter, axis.unit, (min(axis.values), max(axis.values)), found.get(axis.parameter), value)
        for axis, value in zip(outcome.tune.axes, outcome.best.values, strict=True)
    ]
    yield "windows", tune_figure(outcome.design.title, windows)


def spread_figures(outcome: SpreadOutcome) -> Figures:
    """Draw the distributions of a spread.

    Parameters
    ----------
    outcome : SpreadOutcome
        The spread.

    Yields
    ------
    str, Figure
        A histogram for each driver and metric with a limit, at the worst case of each trial.
    """
    table = outcome.table
    for driver in outcome.drivers:
        columns = [k for k, case in enumerate(table.cases) if case.driver == driver]
        for limit in _shown(outcome.design, table) if columns else ():
            values = _worst(table.figures[limit.metric][:, columns], limit)
            name = f"{limit.metric} of {driver}" + (", worst case of each trial" if len(columns) > 1 else "")
            quantity = Quantity(name, METRICS[limit.metric].unit, values)
            nominal = _nominal(outcome.nominal, driver, limit)
            yield (
                f"{driver}_{limit.metric}",
                spread_figure(outcome.design.title, quantity, Bounds(limit.min, limit.max), nominal),
            )


@dataclass(frozen=True)
class _Wanted:
    """A metric that is drawn, with the bounds that the design sets."""

    metric: str
    min: float | None = None
    max: float | None = None


def _shown(design: Design, table: Table) -> list[_Wanted]:
    """Return the metrics with a limit; where there are none, the usual ones."""
    limits = [_Wanted(limit.metric, limit.min, limit.max) for limit in design.limits if limit.metric in table.figures]
    return limits or [_Wanted(metric) for metric in _USUAL if metric in table.figures]


def _worst(values: Array, limit: _Wanted) -> Array:
    """Return the value of the worst case of each point, shape (n,); NaN where one is undefined."""
    if limit.min is None:
        return np.asarray(values.max(axis=1))
    if limit.max is None:
        return np.asarray(values.min(axis=1))
    margin = np.minimum(values - limit.min, limit.max - values)
    place = np.argmin(np.where(np.isnan(margin), -math.inf, margin), axis=1)
    return np.asarray(values[np.arange(values.shape[0]), place])


def _nominal(outcome: Outcome, driver: str, limit: _Wanted) -> float | None:
    results = [result for result in outcome.results if result.driver == driver]
    values = [result.figures[limit.metric].value for result in results if limit.metric in result.figures]
    if not values or any(value is None for value in values):
        return None
    return float(_worst(np.array([values], dtype=float), limit)[0])


def _names(cases: Sequence[CaseLabel]) -> list[str]:
    """Name each case by what tells it from the others."""
    parts = (
        lambda case: case.driver,
        lambda case: case.throw,
        lambda case: "" if math.isnan(case.carrier) else format_quantity(case.carrier, "Hz", 6),
        lambda case: "" if math.isnan(case.temperature) else format_quantity(case.temperature, "degC", 6),
        lambda case: "" if math.isnan(case.level) else format_quantity(case.level, "dBm", 6),
    )
    telling = [part for part in parts if len({part(case) for case in cases}) > 1] or [parts[0]]
    return [", ".join(word for part in telling if (word := part(case))) for case in cases]
