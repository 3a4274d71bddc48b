"""Ratings and powers of a run as plain text: the drivers side by side, a table a temperature."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping, Sequence
from typing import Any

from transim.measure.limits import Judgement
from transim.measure.rate import CHARGE, RateStudy
from transim.quantities import format_quantity
from transim.report.layout import Column, wrap
from transim.report.tables import limit_text, side_by_side, verdict_word
from transim.study.result import Result
from transim.study.run import Outcome

__all__ = ["first_results", "rate_rows", "rates_document", "rating_tables"]

#: Rates that are listed, as multiples of the command's own.
_MULTIPLES = (0.01, 0.1, 0.5, 1.0, 2.0, 5.0, 10.0)
_POWERS = {"junction_dissipation": "junction", "driver_dissipation": "driver", "driver_power": "supplies"}


def first_results(results: Sequence[Result]) -> list[Result]:
    """Return one result for each driver and temperature: ratings do not depend on the carrier.

    Parameters
    ----------
    results : sequence of Result
        Of a run.

    Returns
    -------
    list of Result
        The first of each.
    """
    found: dict[tuple[str, float], Result] = {}
    for result in results:
        found.setdefault((result.driver, result.temperature), result)
    return list(found.values())


def rating_tables(outcome: Outcome) -> list[str]:
    """Write ratings and powers of all drivers.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    list of str
        For each temperature: the ratings with value, margin and verdict, where there are any; then the powers
        against the switching rate and the highest rate. Empty where a run gave neither.
    """
    lines: list[str] = []
    for temperature in dict.fromkeys(result.temperature for result in outcome.results):
        everything = [result for result in outcome.results if result.temperature == temperature]
        group, place = first_results(everything), format_quantity(temperature, "degC", 12)
        if any(result.ratings for result in group):
            head = f"Ratings at {place}, without RF: worst place, margin in percent of the limit"
            lines += [head, "", *_ratings(group)]
        if any(result.rates for result in group):
            lines += [*_rates(group, everything, place), ""]
    return lines[:-1]


def rate_rows(study: RateStudy) -> list[float]:
    """Return the switching rates that are worth a row.

    Parameters
    ----------
    study : RateStudy
        Of one result.

    Returns
    -------
    list of float
        Multiples of the command's own rate at which powers and stored charge settle, and its own rate [Hz].
    """
    return [m * study.stated for m in _MULTIPLES if m == 1.0 or m * study.stated <= study.held]


def rates_document(study: RateStudy | None) -> dict[str, Any] | None:
    """Return the powers against the switching rate for a JSON document.

    Parameters
    ----------
    study : RateStudy or None
        Of one result.

    Returns
    -------
    dict or None
        Duty cycle, highest rate with what limits it, and for each power its settled values [W], the energies of
        the edges [J] and its values at a few rates [Hz].
    """
    if study is None:
        return None
    rates = rate_rows(study)
    return {
        "duty": study.duty,
        "highest": None if study.highest is None else study.highest.rate,
        "limited_by": None if study.highest is None else study.highest.reason,
        "note": study.note,
        "laws_hold_to": study.held,
        "rates": rates,
        "powers": {
            name: {
                "settled_on": law.settled_on,
                "settled_off": law.settled_off,
                "on_edge_energy": law.edge_on,
                "off_edge_energy": law.edge_off,
                "values": [law.at(rate) for rate in rates],
            }
            for name, law in study.laws.items()
        },
    }


def _ratings(group: Sequence[Result]) -> Iterator[str]:
    """Write junctions side by side, for each key its worst place, then drivers in a list."""
    worst = {result.driver: _worst(result) for result in group if result.ratings}
    rows: dict[str, Judgement] = {}
    for own in worst.values():
        rows |= own
    junctions = {name: judgement for name, judgement in rows.items() if name.startswith("junction.")}
    if junctions:
        columns = [_judged(result, junctions, worst[result.driver]) for result in group if result.driver in worst]
        yield from side_by_side(*_ends(junctions, columns))
        yield ""
    drivers = {name: judgement for name, judgement in rows.items() if name not in junctions}
    if drivers:
        cells = [_judged(result, drivers, worst[result.driver]).cells for result in group if result.driver in worst]
        only = tuple(next(cell for cell in row if cell.strip()).strip() for row in zip(*cells, strict=True))
        yield from side_by_side(*_ends(drivers, [Column("value", only)]))
        yield ""


def _ends(rows: Mapping[str, Judgement], columns: Sequence[Column]) -> tuple[Column, Sequence[Column], Column]:
    bounds = Column("limit", tuple(limit_text(judgement) for judgement in rows.values()))
    return Column("rating", tuple(rows)), columns, bounds


def _worst(result: Result) -> dict[str, Judgement]:
    """Return the judgement with the least margin for each key of the design; one that is undefined first of all."""
    found: dict[str, Judgement] = {}
    for judgement in result.ratings:
        key = judgement.metric.removeprefix("rating ").partition(" ")[0]
        if key not in found or _order(judgement) < _order(found[key]):
            found[key] = judgement
    return found


def _order(judgement: Judgement) -> float:
    return -math.inf if judgement.margin is None else judgement.margin


def _judged(result: Result, rows: Iterable[str], worst: Mapping[str, Judgement]) -> Column:
    values = {name: _value(judgement) for name, judgement in worst.items() if name in rows}
    width = max(map(len, values.values()), default=0)
    cells = (f"{values[name]:>{width}} {verdict_word(result, worst[name])}" if name in values else "" for name in rows)
    return Column(result.driver.rjust(width), tuple(cells))


def _value(judgement: Judgement) -> str:
    if judgement.value is None or judgement.margin is None or judgement.max is None:
        return "-"
    share = 100.0 * judgement.margin / judgement.max
    return f"{format_quantity(judgement.value, judgement.unit or '1')} ({share:.0f} %)"


def _rates(group: Sequence[Result], everything: Sequence[Result], place: str) -> Iterator[str]:
    studies = {result.driver: result.rates for result in group if result.rates is not None}
    first = next(iter(studies.values()))
    yield from wrap(
        f"Mean power at {place}, without RF, against the switching rate at a duty cycle of"
        f" {100.0 * first.duty:.4g} %: worst {' / '.join(_POWERS.values())}"
    )
    yield ""
    rates = sorted({rate for study in studies.values() for rate in rate_rows(study)})
    names = Column("rate", tuple(format_quantity(rate, "Hz") for rate in rates), right=True)
    columns = [Column(driver, tuple(_cell(study, rate) for rate in rates)) for driver, study in studies.items()]
    yield from side_by_side(names, columns, None)
    yield ""
    for driver in studies:
        yield from wrap(_highest(driver, everything), "  ")


def _cell(study: RateStudy, rate: float) -> str:
    if rate not in rate_rows(study):
        return "not settled"
    found = (study.laws.get(name) for name in _POWERS)
    return " / ".join("-" if law is None else format_quantity(law.at(rate), "W", 3) for law in found)


def _highest(driver: str, results: Sequence[Result]) -> str:
    """Say which rate is the highest that holds for all carriers, and what sets it."""
    studies = [result.rates for result in results if result.driver == driver and result.rates is not None]
    for study in studies:
        if study.highest is None:
            return f"{driver}: no highest rate, {study.note}"
    bound = min((study.highest for study in studies if study.highest is not None), key=lambda one: one.rate)
    held = format_quantity(min(study.held for study in studies), "Hz")
    rate = format_quantity(bound.rate, "Hz")
    more = f"powers are known up to {held}"
    if bound.reason == CHARGE:
        more = "above it charge does not settle and a rated mean is not known; a run at a shorter period tells"
    return f"{driver}: highest rate {rate}, set by {bound.reason}; {more}"
