"""What `measure` says: the figures of a record with their uncertainties, as text and as a document."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import asdict
from typing import Any

from transim.bench.cycle import Cycle
from transim.bench.measured import record_document
from transim.bench.records import Table
from transim.bench.uncertainty import Estimate
from transim.measure.limits import Judgement, Verdict
from transim.measure.metrics import METRICS
from transim.quantities import format_quantity
from transim.report.document import FORMAT, limit_document
from transim.report.layout import Column, align, wrap
from transim.report.tables import limit_text
from transim.report.verdicts import definition_lines

__all__ = ["measurement_document", "measurement_lines"]

_LAWS = {
    "carrier": "the RF itself, its envelope by quadrature demodulation",
    "linear": "a linear detector",
    "square": "a square-law detector",
    "log": "a logarithmic detector",
}


def measurement_document(
    table: Table,
    cycle: Cycle,
    estimates: Mapping[str, Estimate],
    judgements: Sequence[Judgement],
    verdict: Verdict,
) -> dict[str, Any]:
    """Return the document of a measured record.

    Parameters
    ----------
    table : Table
        The file.
    cycle : Cycle
        The judged cycle.
    estimates : mapping of str to Estimate
        Its figures.
    judgements : sequence of Judgement
        One for each limit.
    verdict : {"pass", "fail", "undefined"}
        Over all of them.

    Returns
    -------
    dict
        As that of a run, with an ``uncertainty`` (one sigma) beside each value and with ``record``.
    """
    limits = [
        {**limit_document(one), "value": one.value, "margin": one.margin, "verdict": one.verdict} for one in judgements
    ]
    metrics = {name: {**asdict(found.figure), "uncertainty": found.uncertainty} for name, found in estimates.items()}
    result = {
        "driver": None,
        "carrier": cycle.carrier,
        "temperature": None,
        "analysis": "record",
        "method": _LAWS[cycle.setup.detector.kind] if cycle.levels else "no RF trace",
        "check_db": None,
        "faults": [],
        "verdict": verdict,
        "metrics": metrics,
        "limits": limits,
    }
    return {
        "format": FORMAT,
        "title": table.file.name,
        "design": None,
        "engine": None,
        "definitions": asdict(cycle.setup.definitions),
        "verdict": verdict,
        "results": [result],
        "record": {"file": table.file.name, "header_lines": table.first, **record_document(cycle, estimates)},
    }


def measurement_lines(
    table: Table, cycle: Cycle, estimates: Mapping[str, Estimate], judgements: Sequence[Judgement], verdict: Verdict
) -> list[str]:
    """Write the figures of a record.

    Parameters
    ----------
    table, cycle, estimates, judgements, verdict
        As for `measurement_document`.

    Returns
    -------
    list of str
        What was read and how, the figures, the reasons of those that are undefined, the verdict.
    """
    lines = [
        *wrap(_source(table, cycle)),
        *(line for sentence in definition_lines(cycle.setup.definitions) for line in wrap(sentence)),
        "",
    ]
    known = [name for name, found in estimates.items() if found.figure.value is not None]
    judged = {one.metric: one for one in judgements}
    lines += align(
        [
            Column("metric", tuple(known)),
            Column("value", tuple(_value(estimates[name]) for name in known), right=True),
            Column("+- 2 sigma", tuple(_spread(estimates[name]) for name in known), right=True),
            Column("mostly from", tuple(_largest(estimates[name]) for name in known)),
            Column("limit", tuple(_limit(judged.get(name)) for name in known))
            if judgements
            else Column("meaning", tuple(METRICS[name].title for name in known)),
        ],
        "  ",
    )
    notes = [f"{name}: {found.figure.note}" for name, found in estimates.items() if name in known and found.figure.note]
    reasons: dict[str, list[str]] = {}
    for name, found in estimates.items():
        if name not in known:
            reasons.setdefault(found.figure.note or "no reason is known", []).append(name)
    if notes:
        lines += ["", *(line for note in notes for line in wrap(note, "  "))]
    if reasons:
        lines += ["", "  undefined, because"]
        lines += [line for why, names in reasons.items() for line in wrap(f"{', '.join(names)}: {why}", "  ")]
    return [*lines, "", *wrap(_verdict(judgements, estimates, verdict))]


def _source(table: Table, cycle: Cycle) -> str:
    detector, levels = cycle.setup.detector, cycle.levels
    parts = [f"{table.file.name}: pulse {cycle.pulse} of {cycle.pulses}"]
    parts.append(f"RF passes while the command is {'high' if cycle.passes_high else 'low'}")
    if levels is not None:
        law = _LAWS[detector.kind]
        if detector.kind == "log":
            law += f" of {format_quantity(detector.slope, 'V')} per dB"
        if detector.kind == "carrier":
            law += f" at {format_quantity(cycle.carrier or 0.0, 'Hz', 6)}"
        on, off = format_quantity(levels.on, "V"), format_quantity(levels.off, "V")
        parts.append(f"the RF trace is {law}, on at {on}, off at {off}")
        parts.append("levels count from the on level" if cycle.setup.through is None
                     else f"a straight connection reads {format_quantity(cycle.setup.through, 'V')}")  # fmt: skip
    return "; ".join(parts)


def _value(found: Estimate) -> str:
    value = found.figure.value
    return "-" if value is None else format_quantity(value, found.figure.unit)


def _spread(found: Estimate) -> str:
    return "?" if found.uncertainty is None else format_quantity(2.0 * found.uncertainty, _width_unit(found), 2)


def _width_unit(found: Estimate) -> str:
    return "dB" if found.figure.unit == "dBm" else found.figure.unit


def _largest(found: Estimate) -> str:
    parts = found.parts
    return max(parts, key=lambda name: parts[name]) if parts and max(parts.values()) > 0.0 else ""


def _limit(one: Judgement | None) -> str:
    return "" if one is None else f"{limit_text(one)} {one.verdict.upper()}"


def _verdict(judgements: Sequence[Judgement], estimates: Mapping[str, Estimate], verdict: Verdict) -> str:
    if not judgements:
        return "no limits to judge; --design FILE brings those of a design"
    near = [
        one.metric
        for one in judgements
        if one.margin is not None and abs(one.margin) < 2.0 * (estimates[one.metric].uncertainty or 0.0)
    ]
    undefined = [one.metric for one in judgements if one.verdict == "undefined"]
    text = f"Verdict: {verdict.upper()}"
    if undefined:
        text += f"; cannot be judged: {', '.join(undefined)}"
    if near:
        text += f"; within two sigma of its limit: {', '.join(near)}"
    return text
