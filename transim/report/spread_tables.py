"""The report of a spread: yield, distributions, the worst trial, and the tolerance that costs most."""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

import numpy as np

from transim.design.tolerances import Tolerance
from transim.measure.metrics import METRICS
from transim.quantities import format_quantity
from transim.report.document import FORMAT, limit_document
from transim.report.layout import Column, align, wrap
from transim.report.study_text import check_lines, failure_lines, limit_figures, percent, study_head, value_text
from transim.study.spread import SpreadOutcome, Yield

__all__ = ["spread_document", "spread_lines"]

_QUANTILES = (0.0, 0.05, 0.5, 0.95, 1.0)
_HEADINGS = ("lowest", "5 %", "median", "95 %", "highest")


def spread_lines(outcome: SpreadOutcome, folder: str) -> list[str]:
    """Write a spread.

    Parameters
    ----------
    outcome : SpreadOutcome
        The spread.
    folder : str
        Its folder.

    Returns
    -------
    list of str
    """
    spread, table = outcome.spread, outcome.table
    how = (
        "all corners and the nominal point"
        if spread.points == "corners"
        else f"{spread.points} trials, seed {spread.seed}"
    )
    lines = [*study_head(outcome.nominal, [f"Spread: {how}"], outcome.drivers, outcome.advance), ""]
    lines += align(
        [
            Column("tolerance of", tuple(tolerance.parameter for tolerance in spread.tolerances)),
            Column("from", tuple(value_text(t.low, t.unit) for t in spread.tolerances), right=True),
            Column("to", tuple(value_text(t.high, t.unit) for t in spread.tolerances), right=True),
            Column("distribution", tuple(map(_distribution, spread.tolerances))),
        ],
        "  ",
    )
    for driver, found in zip(outcome.drivers, outcome.by_driver, strict=False):
        lines += ["", *wrap(f"{driver}: {_yield(found)}"), "", *_distributions(outcome, driver)]
    if len(outcome.drivers) > 1:
        lines += ["", *wrap(f"All drivers together: {_yield(outcome.total)}")]
    lines += ["", *_causes(outcome), ""]
    lines += check_lines("The nominal design", outcome.nominal)
    if outcome.worst_place is not None:
        values = zip(spread.tolerances, table.values[outcome.worst_place].tolist(), strict=True)
        place = ", ".join(f"{tolerance.parameter} {value_text(value, tolerance.unit)}" for tolerance, value in values)
        margin = percent(float(table.margin[outcome.worst_place]))
        lines += wrap(f"The worst trial, number {table.places[outcome.worst_place]}, smallest margin {margin}: {place}")
        lines += check_lines("Run again with every check", outcome.worst)
    lines += wrap("Other trials are compared with ngspice's .ac before the first edge only.")
    lines += failure_lines(table, folder)
    return [*lines, *wrap(f"Written to {folder}: worst (decks and waveforms), arrays.npz, table.csv, points.sqlite")]


def _distribution(tolerance: Tolerance) -> str:
    text = tolerance.distribution
    if text == "normal":
        text += f", {tolerance.sigmas:g} sigma to each end"
    if tolerance.lot is not None:
        text += f", lot {tolerance.lot}"
        text += "" if tolerance.correlation == 1.0 else f" (correlation {tolerance.correlation:g})"
    return text


def _yield(found: Yield) -> str:
    text = (
        f"yield {percent(found.value, False)}, {found.good} of {found.judged} trials;"
        f" {percent(found.confidence, False)} confidence {percent(found.low, False)} .. {percent(found.high, False)}"
    )
    if found.failed:
        every = found.good / (found.judged + found.failed)
        text += f"; {found.failed} failed trials left out, {percent(every, False)} if they count as loss"
    return text


def _distributions(outcome: SpreadOutcome, driver: str) -> list[str]:
    rows = []
    for name, unit, figures in limit_figures(outcome.table, outcome.design.limits, driver):
        known = figures[np.isfinite(figures)]
        cells = (
            [format_quantity(float(value), unit) for value in np.quantile(known, _QUANTILES)]
            if known.size
            else ["-"] * 5
        )
        rows.append((name, *cells, str(int(np.isnan(figures).sum()))))
    names, *columns = zip(*rows, strict=True)
    return align(
        [
            Column("nearest to its limit", names),
            *(
                Column(heading, cells, right=True)
                for heading, cells in zip((*_HEADINGS, "undefined"), columns, strict=True)
            ),
        ],
        "  ",
    )


def _causes(outcome: SpreadOutcome) -> list[str]:
    lost = outcome.total.good < outcome.total.judged
    by_loss = all(cause.of == "loss" for cause in outcome.causes)
    what = "loss" if by_loss else "smallest margin (too few trials are lost, or good, to go by the loss)"
    lines = wrap(f"What the {what} goes with, strongest first:")
    for cause in outcome.causes:
        ends = f"; loss {percent(cause.low, False)} in its lowest, {percent(cause.high, False)} in its highest quarter"
        lines += wrap(f"{percent(cause.share, False)}: {cause.name}{ends if lost else ''}", "  ")
    return lines


def spread_document(outcome: SpreadOutcome, folder: str) -> dict[str, Any]:
    """Return the document of a spread.

    Parameters
    ----------
    outcome : SpreadOutcome
        The spread.
    folder : str
        Its folder, which holds every figure of every trial.

    Returns
    -------
    dict
        ``distributions`` has the quantiles of every metric, by driver, temperature, carrier and level.
    """
    table, worst = outcome.table, outcome.worst_place
    distributions = []
    for c, case in enumerate(table.cases):
        for name, values in table.figures.items():
            known = values[np.isfinite(values[:, c]), c]
            distributions.append(
                {
                    **asdict(case),
                    "metric": name,
                    "unit": METRICS[name].unit,
                    "defined": int(known.size),
                    "mean": float(known.mean()) if known.size else None,
                    "deviation": float(known.std(ddof=1)) if known.size > 1 else None,
                    "quantiles": dict(zip(map(str, _QUANTILES), np.quantile(known, _QUANTILES).tolist(), strict=True))
                    if known.size
                    else None,
                }
            )
    return {
        "format": FORMAT,
        "title": outcome.design.title,
        "design": outcome.design.source.path.name,
        "engine": outcome.nominal.engine,
        "folder": folder,
        "drivers": list(outcome.drivers),
        "points": outcome.spread.points,
        "seed": outcome.spread.seed,
        "tolerances": [asdict(tolerance) for tolerance in outcome.spread.tolerances],
        "limits": [limit_document(limit) for limit in outcome.design.limits],
        "yield": {"value": outcome.total.value, **asdict(outcome.total)},
        "by_driver": {
            driver: {"value": found.value, **asdict(found)}
            for driver, found in zip(outcome.drivers, outcome.by_driver, strict=False)
        },
        "causes": [asdict(cause) for cause in outcome.causes],
        "worst": None
        if worst is None
        else {
            "place": table.places[worst],
            "values": dict(zip(table.parameters, table.values[worst].tolist(), strict=True)),
            "margin": float(table.margin[worst]),
        },
        "failures": [{"place": place, "reason": reason} for place, reason in table.reasons],
        "distributions": distributions,
    }
