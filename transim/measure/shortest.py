"""Shortest usable pulse and gap as metrics: known only where the study that finds them was asked for."""

from __future__ import annotations

from transim.errors import MeasurementError
from transim.measure.metrics import metric
from transim.measure.record import Record
from transim.measure.usable import Usable

__all__ = ["shortest_gap", "shortest_pulse"]


@metric("shortest_pulse", unit="s", title="Shortest usable RF pulse", analysis="request")
def shortest_pulse(record: Record) -> float:
    """Return the shortest interval of the command in which the RF reaches 90 % and settles.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        The interval, at every carrier of the design [s].

    Raises
    ------
    MeasurementError
        If it was not asked for, or not even the command's own pulse is usable.
    """
    return _value(None if record.shortest is None else record.shortest.pulse)


@metric("shortest_gap", unit="s", title="Shortest usable gap between RF pulses", analysis="request")
def shortest_gap(record: Record) -> float:
    """Return the shortest interval of the command in which the RF falls below 10 % and is forgotten.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        The interval, at every carrier of the design [s]: after it the on time differs by less than 5 % from that
        after a long gap.

    Raises
    ------
    MeasurementError
        If it was not asked for, or not even the command's own gap is usable.
    """
    return _value(None if record.shortest is None else record.shortest.gap)


def _value(found: Usable | None) -> float:
    if found is None:
        raise MeasurementError("found on request only: [measure] shortest = true, option --shortest, or a limit on it")
    if found.value is None:
        raise MeasurementError(found.note)
    return found.value
