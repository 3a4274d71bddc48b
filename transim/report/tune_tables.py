"""The report of a tuning: best values, windows, sensitivities, and what cannot be met."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import asdict
from typing import Any

from transim.measure.metrics import METRICS
from transim.quantities import format_quantity
from transim.report.document import FORMAT
from transim.report.layout import Column, align, wrap
from transim.report.study_text import case_place, check_lines, judgement_unit, percent, study_head, value_text
from transim.report.tables import limit_text
from transim.study.score import point_margins, smallest_margin
from transim.study.tune import Obstacle, TuneOutcome

__all__ = ["tune_document", "tune_lines"]


def tune_lines(outcome: TuneOutcome, folder: str) -> list[str]:
    """Write a tuning.

    Parameters
    ----------
    outcome : TuneOutcome
        The tuning.
    folder : str
        Its folder.

    Returns
    -------
    list of str
    """
    if outcome.best is None or outcome.verified is None:
        return [
            *wrap(f"No point could be simulated: {outcome.advance.failed} of {outcome.runs} failed."),
            *wrap(f"Their decks and logs are in {folder}/failed."),
        ]
    goal = outcome.tune.goal
    wanted = f"the {goal.direction} {'normalised margin' if goal.metric == 'margin' else goal.metric}"
    size = 1
    for axis in outcome.tune.axes:
        size *= len(axis.values)
    what = [f"Tuning of driver {outcome.driver} for {wanted}: {outcome.runs} of {size} points simulated"]
    lines = [*study_head(outcome.verified, what, (outcome.driver,), outcome.advance), ""]
    lines += _values(outcome)
    margin = smallest_margin(outcome.best)
    state = "all limits hold" if outcome.feasible else "no simulated point meets all limits; this one is nearest"
    lines += ["", *wrap(f"At the best values {state}; smallest margin {percent(margin)}")]
    lines += ["", *_limits(outcome)]
    if outcome.obstacles:
        lines += ["", *_obstacle_lines(outcome)]
    if outcome.sensitivities:
        lines += ["", *_sensitivity_lines(outcome)]
    lines += ["", *check_lines("The best values, run again with every check", outcome.verified)]
    return [*lines, *wrap(f"Written to {folder}: best (decks and waveforms), points.sqlite")]


def _values(outcome: TuneOutcome) -> list[str]:
    assert outcome.best is not None
    axes = outcome.tune.axes
    windows = {window.parameter: window for window in outcome.windows}
    cells = []
    for axis in axes:
        window = windows.get(axis.parameter)
        if window is None:
            cells.append("none")
            continue
        low, high = value_text(window.low, window.unit), value_text(window.high, window.unit)
        ends = [f"{low}{' (end of range)' if window.low_open else ''}"]
        ends.append(f"{high}{' (end of range)' if window.high_open else ''}")
        cells.append(" .. ".join(ends) + ("" if window.closed else ", perhaps wider"))
    ranges = [f"{value_text(axis.values[0], axis.unit)} .. {value_text(axis.values[-1], axis.unit)}" for axis in axes]
    best = tuple(value_text(v, a.unit) for a, v in zip(axes, outcome.best.values, strict=True))
    return align(
        [
            Column("parameter", tuple(axis.parameter for axis in axes)),
            Column("best", best, right=True),
            Column("steps", tuple(axis.steps for axis in axes)),
            Column("all limits hold in", tuple(cells)),
            Column("looked at", tuple(ranges)),
        ],
        "  ",
    )


def _limits(outcome: TuneOutcome) -> list[str]:
    assert outcome.best is not None
    rows = []
    told = set()
    for case, judgement, margin in point_margins(outcome.best):
        # a rating is that of the run without RF, whatever the carrier and the throw
        rated = judgement.metric not in METRICS
        if (judgement.metric, case.temperature) in told:
            continue
        if rated:
            told.add((judgement.metric, case.temperature))
        degrees = format_quantity(case.temperature, "degC", 12)
        rows.append((f"{degrees}, without RF" if rated else case_place(case), judgement, margin))
    rows.sort(key=lambda row: row[1].metric not in METRICS)
    values = [
        "-" if judgement.value is None else format_quantity(judgement.value, judgement_unit(judgement))
        for _, judgement, _ in rows
    ]
    return align(
        [
            Column("limit", tuple(judgement.metric for _, judgement, _ in rows)),
            Column("at", tuple(place for place, _, _ in rows)),
            Column("value", tuple(values), right=True),
            Column("bound", tuple(_bound(judgement) for _, judgement, _ in rows)),
            Column("margin", tuple(percent(margin) for _, _, margin in rows), right=True),
        ],
        "  ",
    )


def _bound(judgement: Any) -> str:
    if judgement.metric in METRICS:
        return limit_text(judgement)
    return f"at most {format_quantity(judgement.max, judgement_unit(judgement))}"


def _obstacle_lines(outcome: TuneOutcome) -> Iterator[str]:
    for obstacle in outcome.obstacles:
        yield from wrap(_obstacle(obstacle))


def _obstacle(obstacle: Obstacle) -> str:
    judgement, place = obstacle.judgement, case_place(obstacle.case)
    name = f"{judgement.metric} at {place}, {_bound(judgement)}"
    if obstacle.alone:
        return (
            f"In conflict: {name}, can be met ({percent(obstacle.nearest)}) only where other limits are missed;"
            f" at the best values its margin is {percent(obstacle.margin)}"
        )
    if obstacle.nearest is None:
        return f"Cannot be met: {name}, is undefined at every simulated point"
    return (
        f"Cannot be met: {name}; the nearest of all simulated points misses it by {percent(-obstacle.nearest, False)}"
    )


def _sensitivity_lines(outcome: TuneOutcome) -> Iterator[str]:
    yield from wrap("Change for 10 % more of a value (a tenth of its range where steps are linear), strongest first:")
    metrics = list(dict.fromkeys(sensitivity.metric for sensitivity in outcome.sensitivities))
    cells = []
    for metric in metrics:
        unit = METRICS[metric].unit
        found = [sensitivity for sensitivity in outcome.sensitivities if sensitivity.metric == metric]
        cells.append("; ".join(f"{s.parameter} {format_quantity(s.change, unit, 3)}" for s in found))
    for metric, cell in zip(metrics, cells, strict=True):
        yield from wrap(f"{metric}: {cell}", "  ")


def tune_document(outcome: TuneOutcome, folder: str) -> dict[str, Any]:
    """Return the document of a tuning.

    Parameters
    ----------
    outcome : TuneOutcome
        The tuning.
    folder : str
        Its folder.

    Returns
    -------
    dict
        SI units; every value in it was simulated.
    """
    axes, best = outcome.tune.axes, outcome.best
    return {
        "format": FORMAT,
        "title": outcome.design.title,
        "design": outcome.design.source.path.name,
        "engine": None if outcome.verified is None else outcome.verified.engine,
        "folder": folder,
        "driver": outcome.driver,
        "goal": asdict(outcome.tune.goal),
        "seed": outcome.tune.seed,
        "runs": outcome.runs,
        "failed": outcome.advance.failed,
        "feasible": outcome.feasible,
        "best": None if best is None else {a.parameter: v for a, v in zip(axes, best.values, strict=True)},
        "margin": None if best is None else smallest_margin(best),
        "verdict": None if outcome.verified is None else outcome.verified.verdict,
        "windows": [asdict(window) for window in outcome.windows],
        "sensitivities": [
            {"metric": s.metric, "parameter": s.parameter, "change": s.change, "carrier": s.case.carrier}
            for s in outcome.sensitivities
        ],
        "obstacles": [
            {
                "metric": obstacle.judgement.metric,
                "carrier": obstacle.case.carrier,
                "temperature": obstacle.case.temperature,
                "value": obstacle.judgement.value,
                "margin": obstacle.margin,
                "nearest_margin": obstacle.nearest,
                "alone": obstacle.alone,
            }
            for obstacle in outcome.obstacles
        ],
    }
