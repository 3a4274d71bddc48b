"""A run in plain rows: what a page shows in cards and tables, every cell a text."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping, Sequence
from dataclasses import fields
from typing import Any

from transim.design.model import Design, Driver, Junction
from transim.measure.metrics import METRICS
from transim.parts.part import Part
from transim.quantities import format_quantity
from transim.report.cautions import cautions
from transim.report.tables import limit_text, verdict_word
from transim.report.verdicts import closest_sentence, counts_sentence, joined_verdict
from transim.study.result import Result
from transim.study.run import Outcome

__all__ = [
    "caution_rows",
    "deck_rows",
    "definition_rows",
    "driver_cards",
    "figure_tables",
    "limit_tables",
    "setting_tables",
]

Row = dict[str, Any]

def driver_cards(outcome: Outcome) -> list[Row]:
    """Return a card for each driver.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    list of dict
        ``name``, ``verdict`` (empty where nothing is judged), ``counts`` and ``closest``: the limit that is
        missed most, or has least margin.
    """
    cards = []
    for driver in dict.fromkeys(case.driver for case in outcome.cases):
        results = [result for result in outcome.results if result.driver == driver]
        judged = any(result.judgements or result.ratings for result in results)
        cards.append(
            {
                "name": driver,
                "verdict": joined_verdict(results).upper() if judged else "",
                "counts": counts_sentence(results),
                "closest": closest_sentence(results) or "",
            }
        )
    return cards


def limit_tables(outcome: Outcome) -> list[Row]:
    """Return a table of limits for each temperature, carrier, level and analysis.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    list of dict
        ``place``, ``drivers`` and ``rows``; a row has ``metric``, ``title``, ``limit`` and ``cells`` with
        ``value``, ``margin`` and ``word``.
    """
    tables = []
    for place, group in _groups(outcome).items():
        rows = []
        for number, limit in enumerate(outcome.design.limits):
            cells = []
            for result in group:
                judgement = result.judgements[number]
                unit = METRICS[limit.metric].unit
                margin = "" if judgement.margin is None else _signed(judgement.margin, unit)
                cells.append({"value": _value(result, limit.metric), "margin": margin,
                              "word": verdict_word(result, judgement)})  # fmt: skip
            title = METRICS[limit.metric].title
            rows.append({"metric": limit.metric, "title": title, "limit": limit_text(limit), "cells": cells})
        tables.append({"place": place, "drivers": [result.label for result in group], "rows": rows})
    return tables if outcome.design.limits else []


def figure_tables(outcome: Outcome) -> list[Row]:
    """Return a table of all figures, drivers side by side, for each temperature, carrier, level and analysis.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    list of dict
        ``place``, ``drivers``, ``rows`` of ``metric``, ``title``, ``cells`` (texts) and ``notes`` (why a figure
        is undefined), and ``absent``: the metrics that no driver has, by the reason.
    """
    tables = []
    for place, group in _groups(outcome).items():
        everyone = [result.label for result in group]
        rows = []
        absent: dict[str, list[str]] = {}
        for name, metric in METRICS.items():
            known = metric.serves(group[0].analysis, throws=bool(group[0].throw))
            if not known or any(name not in result.figures for result in group):
                continue
            why: dict[str, list[str]] = {}
            for result in group:
                figure = result.figures[name]
                if figure.value is None:
                    why.setdefault(figure.note or "no reason is known", []).append(result.label)
            if len(why) == 1 and everyone in why.values():
                absent.setdefault(next(iter(why)), []).append(name)
                continue
            notes = [f"{', '.join(who)}: {note}" for note, who in why.items()]
            cells = [_value(result, name) for result in group]
            rows.append({"metric": name, "title": metric.title, "cells": cells, "notes": notes})
        tables.append({"place": place, "drivers": everyone, "rows": rows, "absent": absent})
    return tables


def definition_rows(design: Design) -> list[tuple[str, str]]:
    """Return the definitions that were used and the numerical settings.

    Parameters
    ----------
    design : Design
        The design.

    Returns
    -------
    list of (str, str)
        Name and value.
    """
    used = design.definitions
    units = {"settle_band": "dB", "phase_band": "deg", "video_bandwidth": "Hz", "resolution_bandwidth": "Hz",
             "isolation_level": "dB", "timeout": "s", "reltol": "1"}  # fmt: skip
    rows = [(field.name, getattr(used, field.name)) for field in fields(used)]
    rows += [(name, getattr(design.numerics, name)) for name in type(design.numerics).model_fields]
    return [(name, _setting(value, units.get(name))) for name, value in rows]


def setting_tables(design: Design) -> list[Row]:
    """Return every value of the circuit, defaults included.

    Parameters
    ----------
    design : Design
        The design.

    Returns
    -------
    list of dict
        ``name``, ``summary``, ``model`` and ``rows`` of (name, value, origin, meaning): path, junctions, drivers.
    """
    switch = design.switch
    tables = [_settings(f"path {switch.path.name}", switch.path, switch.values, None)]
    junctions = {junction.name: junction for junction in switch.junctions.values()}
    components: list[tuple[str, Junction | Driver]] = [("junction", one) for one in junctions.values()]
    components += [("driver", driver) for driver in design.drivers]
    for role, one in components:
        tables.append(_settings(f"{role} {one.name}: {one.part.name}", one.part, one.values, one.model))
    return tables


def deck_rows(outcome: Outcome) -> list[tuple[str, str, str]]:
    """Return every deck that was run, with the SHA-256 of its text.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    list of (str, str, str)
        Driver and temperature, name of the deck, hexadecimal digest.
    """
    rows = (
        (
            f"{case.driver}, {format_quantity(case.temperature, 'degC', 12)}",
            deck.name,
            hashlib.sha256(deck.text.encode()).hexdigest(),
        )
        for case in outcome.cases
        for deck in case.decks
    )
    return list(dict.fromkeys(rows))


def caution_rows(outcome: Outcome) -> list[tuple[str, str]]:
    """Return what a reader must know before using a figure.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    list of (str, str)
        Where it holds, and the text: faults of a run, limits that could not be judged, warnings, and what can
        hurt whoever builds it.
    """
    found: dict[str, list[str]] = {}
    for result in outcome.results:
        place = f"{result.label}, {_place(result)}"
        undefined = [
            f"limit on {judgement.metric} not judged: {result.figures[judgement.metric].note}"
            for judgement in result.judgements
            if judgement.value is None
        ]
        faults = [f"fault: {fault}" for fault in result.faults]
        uncertain = [
            f"limit on {judgement.metric} not judged: {judgement.note}"
            for judgement in result.judgements
            if judgement.value is not None and judgement.verdict == "undefined"
        ]
        for text in (*faults, *undefined, *uncertain, *result.warnings, *result.notes, *result.retries):
            found.setdefault(text, []).append(place)
    rows = [("; ".join(places), text) for text, places in found.items()]
    return [*rows, *(("the whole design", text) for text in cautions(outcome))]


def _groups(outcome: Outcome) -> dict[str, list[Result]]:
    groups: dict[str, list[Result]] = {}
    for result in outcome.results:
        groups.setdefault(_place(result), []).append(result)
    return groups


def _place(result: Result) -> str:
    carrier, degrees = format_quantity(result.carrier, "Hz", 12), format_quantity(result.temperature, "degC", 12)
    level = f" at {format_quantity(result.level, 'dBm')}" if result.analysis == "carrier" else ""
    return f"{carrier}{level}, {degrees}, {result.analysis} analysis"


def _value(result: Result, name: str) -> str:
    figure = result.figures[name]
    return "\N{EN DASH}" if figure.value is None else format_quantity(figure.value, figure.unit)


def _signed(value: float, unit: str) -> str:
    text = format_quantity(abs(value), unit, 3)
    return f"+{text}" if value >= 0.0 else f"\N{MINUS SIGN}{text}"


def _setting(value: object, unit: str | None) -> str:
    if value is None:
        return "none"
    if unit is not None and isinstance(value, int | float):
        return format_quantity(float(value), unit, 12)
    return str(value)


def _settings(name: str, part: Part, values: Mapping[str, float], model: str | None) -> Row:
    silenced: Sequence[str] = part.model.parameters if model is not None and part.model is not None else ()
    rows = [
        (s.name, format_quantity(values[s.name], s.unit, 12), "default" if values[s.name] == s.default else "set",
         s.meaning)
        for s in part.settings.values()
        if s.name not in silenced
    ]  # fmt: skip
    return {"name": name, "summary": part.summary, "model": model or "", "rows": rows}
