"""Sentences and cells that the reports of all studies share."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence

import numpy as np
import numpy.typing as npt

from transim.measure.limits import Judgement, Limit
from transim.measure.metrics import METRICS
from transim.quantities import format_quantity
from transim.report.layout import wrap
from transim.report.verdicts import definition_lines
from transim.study.point import CaseFigures
from transim.study.run import Outcome
from transim.study.study import Advance
from transim.study.table import CaseLabel, Table

__all__ = [
    "case_place",
    "check_lines",
    "failure_lines",
    "judgement_unit",
    "limit_figures",
    "percent",
    "study_head",
    "value_text",
]

#: What is shown where the design has no limits.
_SHOWN = ("on_time", "off_time", "insertion_loss", "isolation", "video_peak")
#: Failures that are listed one by one.
_LISTED = 5


def study_head(outcome: Outcome, what: Sequence[str], drivers: Sequence[str], advance: Advance) -> list[str]:
    """Write what was studied, how much of it, and by which definitions.

    Parameters
    ----------
    outcome : Outcome
        The nominal or the best design, run with every check.
    what : sequence of str
        The study in words, one sentence each.
    drivers : sequence of str
        What was run.
    advance : Advance
        Points, and how many failed.

    Returns
    -------
    list of str
    """
    design = outcome.design
    count = f"{advance.done} points"
    count += f", {advance.reused} of them from before" if advance.reused else ""
    count += f", {advance.failed} failed" if advance.failed else ""
    plural = "s" if len(drivers) > 1 else ""
    return [
        *wrap(design.title),
        *(line for sentence in what for line in wrap(sentence)),
        *wrap(
            f"{outcome.engine}; driver{plural} {', '.join(drivers)}; {count}; {advance.seconds:.1f} s;"
            f" design file {design.source.path.name}"
        ),
        *(line for sentence in definition_lines(design.definitions) for line in wrap(sentence)),
    ]


def check_lines(name: str, outcome: Outcome | None) -> list[str]:
    """Write how a design that was run with every check compares with ngspice, and its verdict.

    Parameters
    ----------
    name : str
        Which design.
    outcome : Outcome or None
        Its run; None where its checks could not be run.

    Returns
    -------
    list of str
    """
    if outcome is None:
        return wrap(f"{name}: its checks could not be run")
    checks = [result.check for result in outcome.results if result.check is not None]
    faults = [fault for result in outcome.results for fault in result.faults]
    lines = wrap(
        f"{name}: {outcome.verdict.upper()}"
        + (f"; S differs from ngspice's own .ac by {format_quantity(max(checks), 'dB', 2)} at most" if checks else "")
    )
    for fault in faults:
        lines += wrap(f"fault: {fault}", "  ")
    return lines


def failure_lines(table: Table, folder: str) -> list[str]:
    """Write why points failed, each reason once.

    Parameters
    ----------
    table : Table
        All points.
    folder : str
        The study's folder, where their decks are.

    Returns
    -------
    list of str
        Nothing where none failed.
    """
    if not table.reasons:
        return []
    by_reason: dict[str, list[str]] = {}
    for place, reason in table.reasons:
        by_reason.setdefault(reason, []).append(place)
    lines = wrap(f"Failed: {len(table.reasons)} of {len(table.places)} points; decks and logs are in {folder}/failed")
    for reason, places in list(by_reason.items())[:_LISTED]:
        lines += wrap(f"{len(places)} (first {places[0]}): {reason[:300]}", "  ")
    return lines


def value_text(value: float, unit: str) -> str:
    """Write the value of a parameter, every digit that it was given with."""
    return format_quantity(value, unit, 6)


def percent(share: float | None, sign: bool = True) -> str:
    """Write a share in percent; ``-`` where there is none."""
    if share is None or math.isnan(share):
        return "-"
    return f"{100.0 * share:{'+' if sign else ''}.3g} %"


def judgement_unit(judgement: Judgement) -> str:
    """Return the unit of a limit or rating."""
    known = METRICS.get(judgement.metric)
    return known.unit if known is not None else (getattr(judgement, "unit", None) or "1")


def case_place(case: CaseFigures | CaseLabel) -> str:
    """Write where a figure belongs: carrier and temperature, where they are not the parameter itself."""
    parts = []
    if not math.isnan(case.carrier):
        parts.append(format_quantity(case.carrier, "Hz", 12))
    if not math.isnan(case.temperature):
        parts.append(format_quantity(case.temperature, "degC", 12))
    place = " and ".join(parts) or "its own carrier and temperature"
    return f"{place} on {case.throw}" if case.throw else place


def limit_figures(
    table: Table, limits: Sequence[Limit], driver: str
) -> Iterator[tuple[str, str, npt.NDArray[np.float64]]]:
    """Return, for each limit, the figure nearest to it over the cases of one driver.

    Parameters
    ----------
    table : Table
        All points.
    limits : sequence of Limit
        Of the design; without any, the usual metrics and their largest figure.
    driver : str
        Its name.

    Yields
    ------
    tuple of str, str and ndarray, shape (n,)
        Metric, unit and figures; NaN where undefined in any case.
    """
    columns = [c for c, case in enumerate(table.cases) if case.driver == driver]
    wanted: Mapping[str, Limit | None] = {limit.metric: limit for limit in limits} or dict.fromkeys(_SHOWN)
    for name, limit in wanted.items():
        values = table.figures[name][:, columns] if columns else np.full((len(table.places), 1), np.nan)
        low = None if limit is None else limit.min
        high = None if limit is None else limit.max
        above = np.full(values.shape, np.inf) if high is None else high - values
        below = np.full(values.shape, np.inf) if low is None else values - low
        margin = -values if limit is None else np.minimum(above, below)
        # an undefined case is the worst of all
        worst = np.argmin(np.where(np.isnan(values), -np.inf, margin), axis=1)
        yield name, METRICS[name].unit, values[np.arange(len(values)), worst]
