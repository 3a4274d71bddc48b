"""Shortest usable pulse and gap, in words and for a JSON document."""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

from transim.measure.usable import Shortest, Usable
from transim.quantities import format_quantity
from transim.report.layout import wrap
from transim.study.run import Outcome

__all__ = ["shortest_document", "shortest_lines"]


def shortest_lines(outcome: Outcome) -> list[str]:
    """Write shortest usable pulse and gap of each driver and temperature.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    list of str
        Empty where they were not asked for.
    """
    several = len(outcome.design.environment.temperature) > 1
    lines: list[str] = []
    found = [(case, throw, throw.shortest) for case in outcome.cases for throw in case.throws]
    for case, throw, shortest in found:
        if shortest is None:
            continue
        place = f"{case.driver} {throw.name}".rstrip()
        place += f", {format_quantity(case.temperature, 'degC', 12)}" if several else ""
        for name, usable in (("pulse", shortest.pulse), ("gap", shortest.gap)):
            lines += wrap(f"{place}: {_sentence(name, usable)}", "  ")
    if not lines:
        return []
    return [
        "Shortest usable RF pulse (reaches 90 %, settles) and gap (falls below 10 %, next on_time within 5 %)",
        "",
        *lines,
    ]


def _sentence(name: str, found: Usable) -> str:
    if found.value is None:
        return f"no shortest {name}, {found.note}"
    value, tolerance = format_quantity(found.value, "s", 3), format_quantity(found.tolerance, "s", 2)
    return f"shortest {name} {value}, at most {tolerance} too long; {found.note}"


def shortest_document(shortest: Shortest | None) -> dict[str, Any] | None:
    """Return shortest pulse and gap for a JSON document.

    Parameters
    ----------
    shortest : Shortest or None
        Of a case; None: not asked for.

    Returns
    -------
    dict or None
        ``pulse`` and ``gap``, each with ``value``, ``tolerance`` [s] and ``note``.
    """
    return None if shortest is None else asdict(shortest)
