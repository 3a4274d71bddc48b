"""First and last pulse of a train, side by side."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import asdict
from typing import Any

from transim.measure.metrics import METRICS, Figure
from transim.quantities import format_quantity
from transim.report.layout import GAP, WIDTH, Column, align, wrap
from transim.study.result import Result
from transim.study.run import Outcome

__all__ = ["first_document", "pulse_lines"]

#: Figures that differ by less than this are as good as equal.
_EQUAL = 1e-3
#: Smaller values are rounding, in any unit.
_NOTHING = 1e-18
#: A larger ratio is no percentage that one reads.
_MOST = 10.0


def pulse_lines(outcome: Outcome) -> list[str]:
    """Set the figures of the first pulse beside those of the last, where they differ.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    list of str
        A table for the first carrier of each driver, temperature and analysis; empty for single pulses.
    """
    lines: list[str] = []
    told: set[tuple[str, float, str]] = set()
    for result in outcome.results:
        key = (result.label, result.temperature, result.analysis)
        # one carrier tells enough; the document has them all
        if result.first_pulse is None or key in told:
            continue
        told.add(key)
        place = f"{result.label} at {format_quantity(result.carrier, 'Hz', 12)}"
        place += f" and {format_quantity(result.temperature, 'degC', 12)}, {result.analysis} analysis"
        rows = _rows(result.figures, result.first_pulse)
        if not rows:
            lines += [*wrap(f"{place}: first and last pulse differ by less than {_EQUAL:.1%} in every figure"), ""]
            continue
        lines += [f"First and last pulse, {place}; equal figures left out", "", *_table(rows), ""]
    return lines[:-1]


def _rows(last: Mapping[str, Figure], first: Mapping[str, Figure]) -> list[tuple[str, Figure, Figure]]:
    found = []
    for name, figure in last.items():
        other = first[name]
        if figure.value is None or other.value is None:
            different = (figure.value is None) != (other.value is None)
        else:
            largest = max(abs(figure.value), abs(other.value))
            different = largest > _NOTHING and abs(figure.value - other.value) > _EQUAL * largest
        if different:
            found.append((name, other, figure))
    return found


def _table(rows: Sequence[tuple[str, Figure, Figure]]) -> list[str]:
    changes = []
    for _, first, last in rows:
        known = first.value is not None and last.value is not None and first.value != 0.0
        plain = last.unit not in ("dB", "dBm")
        ratio = last.value / first.value - 1.0 if known and plain else math.inf  # type: ignore[operator]
        changes.append(f"{100.0 * ratio:+.1f} %" if abs(ratio) < _MOST else "")
    titles = Column("meaning", tuple(METRICS[name].title for name, *_ in rows))
    columns = [
        Column("metric", tuple(name for name, *_ in rows)),
        Column("first", tuple(_value(first) for _, first, _ in rows), right=True),
        Column("last", tuple(_value(last) for *_, last in rows), right=True),
        Column("change", tuple(changes), right=True),
    ]
    fits = 2 + sum(column.width + len(GAP) for column in (*columns, titles)) <= WIDTH
    return align([*columns, titles] if fits else columns, "  ")


def _value(figure: Figure) -> str:
    return "-" if figure.value is None else format_quantity(figure.value, figure.unit)


def first_document(result: Result) -> dict[str, Any] | None:
    """Return the figures of the first pulse.

    Parameters
    ----------
    result : Result
        Of a run.

    Returns
    -------
    dict or None
        As ``metrics`` of the last pulse; None where there is one pulse.
    """
    if result.first_pulse is None:
        return None
    return {name: asdict(figure) for name, figure in result.first_pulse.items()}
