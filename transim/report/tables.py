"""The figures of a run as plain text: one table a carrier, the drivers side by side."""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterable, Iterator, Sequence

from transim.measure.limits import Judgement, Limit
from transim.measure.metrics import METRICS
from transim.quantities import format_quantity
from transim.report.layout import GAP, WIDTH, Column, align, wrap
from transim.study.result import Result
from transim.study.run import Outcome

__all__ = ["limit_text", "metric_tables", "side_by_side", "verdict_word"]


def limit_text(limit: Limit | Judgement) -> str:
    """Write a limit in words.

    Parameters
    ----------
    limit : Limit or Judgement
        With one bound or two.

    Returns
    -------
    str
        For example ``at most 500 ns``.
    """
    unit = (limit.unit if isinstance(limit, Judgement) else None) or METRICS[limit.metric].unit
    if limit.min is None or limit.max is None:
        bound = limit.max if limit.min is None else limit.min
        word = "at most" if limit.min is None else "at least"
        return word if bound is None else f"{word} {format_quantity(bound, unit)}"
    return f"{format_quantity(limit.min, unit)} .. {format_quantity(limit.max, unit)}"


def verdict_word(result: Result, judgement: Judgement) -> str:
    """Return the verdict on one limit as a word: a run with a fault judges nothing.

    Parameters
    ----------
    result : Result
        The run.
    judgement : Judgement
        One of its own.

    Returns
    -------
    str
        ``PASS``, ``FAIL`` or ``UNDEFINED``.
    """
    return "UNDEFINED" if result.faults else judgement.verdict.upper()


def metric_tables(outcome: Outcome) -> list[str]:
    """Write the figures of all drivers.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    list of str
        For each temperature, carrier, level and analysis: the metrics that have a limit, then the others, then
        the reasons of those that are undefined.
    """
    groups: dict[tuple[float, float, float, str], list[Result]] = {}
    for result in outcome.results:
        key = (result.temperature, result.carrier, result.level, result.analysis)
        groups.setdefault(key, []).append(result)
    lines: list[str] = []
    for (temperature, carrier, level, analysis), group in groups.items():
        at = [format_quantity(carrier, "Hz", 12), format_quantity(level, "dBm", 12)]
        place = f"{', '.join(at)} and {format_quantity(temperature, 'degC', 12)}"
        lines += [f"At {place}, {analysis} analysis", "", *_group(group, outcome.design.limits), ""]
    return lines[:-1]


def _group(group: Sequence[Result], limits: Sequence[Limit]) -> Iterator[str]:
    limited = tuple(dict.fromkeys(limit.metric for limit in limits))
    analysis = group[0].analysis
    # a metric of the other analysis alone would only fill a row with its absence
    several = bool(group[0].throw)
    others = tuple(
        name for name, entry in METRICS.items() if name not in limited and entry.serves(analysis, throws=several)
    )
    if limited:
        bounds = Column("limit", tuple(limit_text(limit) for limit in limits))
        yield from side_by_side(
            Column("with a limit", limited), [_judged(result) for result in group], bounds
        )
        yield ""
    heading = "without a limit" if limited else "metric"
    titles = Column("meaning", tuple(METRICS[name].title for name in others))
    columns = [_plain(result, others) for result in group]
    names = Column(heading, others)
    # the titles are worth a column only where no table has to be split for them
    fits = sum(column.width + len(GAP) for column in (names, *columns, titles)) <= WIDTH
    yield from side_by_side(names, columns, titles if fits else None)
    reasons = _reasons(group)
    if reasons:
        yield ""
        yield "  undefined (-), because"
        for reason in reasons:
            yield from wrap(reason, "  ")


def _judged(result: Result) -> Column:
    values = [_value(result, judgement.metric) for judgement in result.judgements]
    words = [verdict_word(result, judgement) for judgement in result.judgements]
    width = max(map(len, values), default=0)
    cells = tuple(f"{value:>{width}} {word}" for value, word in zip(values, words, strict=True))
    return Column(result.label.rjust(width), cells)


def _plain(result: Result, names: Iterable[str]) -> Column:
    return Column(result.label, tuple(_value(result, name) for name in names), right=True)


def _value(result: Result, name: str) -> str:
    figure = result.figures[name]
    if figure.value is None:
        return "-"
    text = format_quantity(figure.value, figure.unit)
    if figure.uncertainty is None:
        return text
    known = math.isfinite(figure.uncertainty)
    width = format_quantity(figure.uncertainty, _width_unit(figure.unit), 2) if known else "?"
    return f"{text} \N{PLUS-MINUS SIGN} {width}"


def _width_unit(unit: str) -> str:
    """Return the unit of a difference: two powers in dBm differ by decibels."""
    return "dB" if unit == "dBm" else unit


def side_by_side(names: Column, columns: Sequence[Column], last: Column | None) -> Iterator[str]:
    """Set the columns of the drivers between names and last column, in several tables where they do not fit.

    Parameters
    ----------
    names : Column
        Begins each table.
    columns : sequence of Column
        Of the drivers.
    last : Column or None
        Ends each table.

    Yields
    ------
    str
        Lines of text.
    """
    ends = [names] if last is None else [names, last]
    room = WIDTH - sum(column.width + len(GAP) for column in ends)
    rest = list(columns)
    while rest:
        widths = itertools.accumulate(column.width + len(GAP) for column in rest)
        count = max(1, sum(width <= room for width in widths))
        if rest[0] is not columns[0]:
            yield ""
        yield from align([names, *rest[:count], *([] if last is None else [last])], "  ")
        rest = rest[count:]


def _reasons(group: Sequence[Result]) -> list[str]:
    """Return each reason once, with the metrics and drivers that it holds for."""
    metrics: dict[tuple[str, str], list[str]] = {}
    for result in group:
        for name, figure in result.figures.items():
            wanted = METRICS[name].serves(result.analysis, throws=bool(result.throw))
            wanted = wanted or any(j.metric == name for j in result.judgements)
            if figure.value is None and wanted:
                metrics.setdefault((figure.note or "no reason is known", result.label), []).append(name)
    drivers: dict[tuple[str, str], list[str]] = {}
    for (note, driver), names in metrics.items():
        drivers.setdefault((note, ", ".join(names)), []).append(driver)
    everyone = [result.label for result in group]
    return [
        f"{names}: {note}" if who == everyone else f"{names} ({', '.join(who)}): {note}"
        for (note, names), who in drivers.items()
    ]
