"""The report of a sweep: a table along one parameter, or a map over two."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np

from transim.design.axes import Axis
from transim.quantities import format_quantity
from transim.report.document import FORMAT, limit_document
from transim.report.layout import GAP, WIDTH, Column, align, wrap
from transim.report.study_text import check_lines, failure_lines, limit_figures, percent, study_head, value_text
from transim.study.sweep import SweepOutcome

__all__ = ["sweep_document", "sweep_lines"]


def sweep_lines(outcome: SweepOutcome, folder: str) -> list[str]:
    """Write a sweep.

    Parameters
    ----------
    outcome : SweepOutcome
        The sweep.
    folder : str
        Its folder.

    Returns
    -------
    list of str
    """
    axes = outcome.sweep.axes
    what = [f"Sweep of {_axis(axis)}" for axis in axes]
    lines = [*study_head(outcome.nominal, what, outcome.drivers, outcome.advance), ""]
    for number, driver in enumerate(outcome.drivers):
        lines += _along(outcome, driver) if len(axes) == 1 else _map(outcome, driver)
        good = int(outcome.feasible[..., number].sum())
        lines += ["", *wrap(f"{driver}: all limits hold at {good} of {len(outcome.table.places)} points"), ""]
    lines += check_lines("The nominal design", outcome.nominal)
    if outcome.best_place is not None:
        values = zip(axes, outcome.table.values[outcome.best_place].tolist(), strict=True)
        place = ", ".join(f"{axis.parameter} {value_text(value, axis.unit)}" for axis, value in values)
        margin = percent(float(outcome.table.margin[outcome.best_place]))
        lines += check_lines(f"The best point, {place}, smallest margin {margin}", outcome.best)
    lines += wrap("Other points are compared with ngspice's .ac before the first edge only.")
    lines += failure_lines(outcome.table, folder)
    return [*lines, *wrap(f"Written to {folder}: arrays.npz, table.csv, points.sqlite")]


def _axis(axis: Axis) -> str:
    low, high = value_text(axis.values[0], axis.unit), value_text(axis.values[-1], axis.unit)
    return f"{axis.parameter}: {len(axis.values)} values, {low} .. {high}, {axis.steps}"


def _along(outcome: SweepOutcome, driver: str) -> Iterator[str]:
    """Write one row a value: the figure nearest to each limit, the smallest margin, whether all limits hold."""
    table, axis = outcome.table, outcome.sweep.axes[0]
    columns = [Column(axis.parameter, tuple(value_text(value, axis.unit) for value in axis.values), right=True)]
    for name, unit, figures in limit_figures(table, outcome.design.limits, driver):
        cells = tuple("-" if np.isnan(value) else format_quantity(value, unit) for value in figures.tolist())
        columns.append(Column(name, cells, right=True))
    columns += [
        Column("margin", tuple(percent(value) for value in _margins(outcome, driver).tolist()), right=True),
        Column("limits", tuple(_words(outcome, driver))),
    ]
    yield f"Driver {driver}"
    yield ""
    first, rest = columns[0], columns[1:]
    while rest:
        width, count = first.width, 0
        while count < len(rest) and (count == 0 or width + len(GAP) + rest[count].width + 2 <= WIDTH):
            width += len(GAP) + rest[count].width
            count += 1
        yield from align([first, *rest[:count]], "  ")
        rest = rest[count:]
        if rest:
            yield ""


def _words(outcome: SweepOutcome, driver: str) -> list[str]:
    number = outcome.drivers.index(driver)
    good = outcome.feasible[..., number].ravel().tolist()
    failed = outcome.table.failed.tolist()
    return ["failed" if lost else "met" if fine else "missed" for lost, fine in zip(failed, good, strict=True)]


def _margins(outcome: SweepOutcome, driver: str) -> np.ndarray[Any, np.dtype[np.float64]]:
    table = outcome.table
    columns = [c for c, case in enumerate(table.cases) if case.driver == driver]
    if not columns:
        return np.full(len(table.places), np.nan)
    return np.asarray(table.case_margin[:, columns].min(axis=1))


def _map(outcome: SweepOutcome, driver: str) -> Iterator[str]:
    """Write the smallest margin in percent over both parameters; the feasible region is in brackets."""
    slow, fast = outcome.sweep.axes
    margins = _margins(outcome, driver).reshape(outcome.shape)
    words = np.array(_words(outcome, driver)).reshape(outcome.shape)
    yield f"Driver {driver}: smallest margin [%] over {slow.parameter} (rows) and {fast.parameter} (columns);"
    yield "in brackets where all limits hold, x where the point failed, - where a limit is undefined"
    yield ""
    names = Column("", tuple(value_text(value, slow.unit) for value in slow.values), right=True)
    columns = [
        Column(
            value_text(value, fast.unit), tuple(map(_cell, margins[:, k].tolist(), words[:, k].tolist())), right=True
        )
        for k, value in enumerate(fast.values)
    ]
    while columns:
        width, count = names.width + 2, 0
        while count < len(columns) and (count == 0 or width + len(GAP) + columns[count].width <= WIDTH):
            width += len(GAP) + columns[count].width
            count += 1
        yield from align([names, *columns[:count]], "  ")
        columns = columns[count:]
        if columns:
            yield ""


def _cell(margin: float, word: str) -> str:
    if word == "failed":
        return "x"
    number = "-" if np.isnan(margin) else f"{100.0 * margin:.3g}"
    return f"[{number}]" if word == "met" else number


def sweep_document(outcome: SweepOutcome, folder: str) -> dict[str, Any]:
    """Return the document of a sweep.

    Parameters
    ----------
    outcome : SweepOutcome
        The sweep.
    folder : str
        Its folder, which holds every figure of every point.

    Returns
    -------
    dict
        ``points`` has one entry a point, in the order of the axes.
    """
    table = outcome.table
    feasible = outcome.feasible.reshape(len(table.places), -1)
    reasons = dict(table.reasons)
    points = [
        {
            "values": table.values[n].tolist(),
            "feasible": dict(zip(outcome.drivers, feasible[n].tolist(), strict=True)),
            "margin": float(table.margin[n]),
            "reason": reasons.get(place),
            "cases": [
                {
                    "driver": case.driver,
                    "throw": case.throw or None,
                    "temperature": case.temperature,
                    "carrier": case.carrier,
                    "level": case.level,
                    "metrics": {name: float(values[n, c]) for name, values in table.figures.items()},
                }
                for c, case in enumerate(table.cases)
            ]
            if not table.failed[n]
            else [],
        }
        for n, place in enumerate(table.places)
    ]
    return {
        "format": FORMAT,
        "title": outcome.design.title,
        "design": outcome.design.source.path.name,
        "engine": outcome.nominal.engine,
        "folder": folder,
        "drivers": list(outcome.drivers),
        "axes": [
            {"parameter": axis.parameter, "unit": axis.unit, "values": list(axis.values), "steps": axis.steps}
            for axis in outcome.sweep.axes
        ],
        "limits": [limit_document(limit) for limit in outcome.design.limits],
        "failed": outcome.advance.failed,
        "points": points,
    }
