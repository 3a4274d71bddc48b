"""Figures of the two settled states."""

from __future__ import annotations

import math

from transim.errors import MeasurementError
from transim.measure.metrics import metric
from transim.measure.record import Record

__all__ = ["insertion_loss", "isolation", "return_loss_off", "return_loss_on"]


@metric("insertion_loss", unit="dB", title="Insertion loss")
def insertion_loss(record: Record) -> float:
    """Return the loss of the settled on state.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        -20 log10 |S21|, positive for a loss [dB].

    Raises
    ------
    MeasurementError
        If the state is not recorded or passes nothing.
    """
    return _loss(record.static_on, "S21 of the static on state")


@metric("isolation", unit="dB", title="Isolation")
def isolation(record: Record) -> float:
    """Return the attenuation of the settled off state.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        -20 log10 |S21|, positive for a loss [dB].

    Raises
    ------
    MeasurementError
        If the state is not recorded or passes nothing.
    """
    return _loss(record.static_off, "S21 of the static off state")


@metric("return_loss_on", unit="dB", title="Return loss, on")
def return_loss_on(record: Record) -> float:
    """Return the return loss of the settled on state.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        -20 log10 |S11|, positive for a passive circuit [dB].

    Raises
    ------
    MeasurementError
        If the state is not recorded or reflects nothing.
    """
    return _loss(record.match_on, "S11 of the static on state")


@metric("return_loss_off", unit="dB", title="Return loss, off")
def return_loss_off(record: Record) -> float:
    """Return the return loss of the settled off state.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        -20 log10 |S11|, positive for a passive circuit [dB].

    Raises
    ------
    MeasurementError
        If the state is not recorded or reflects nothing.
    """
    return _loss(record.match_off, "S11 of the static off state")


def _loss(parameter: complex | None, name: str) -> float:
    if parameter is None:
        raise MeasurementError(f"no {name} in this record")
    size = abs(parameter)
    if not math.isfinite(size):
        raise MeasurementError(f"{name} is not a finite number")
    if size == 0.0:
        raise MeasurementError(f"infinite: {name} is zero", level=0.0)
    return -20.0 * math.log10(size) + 0.0
