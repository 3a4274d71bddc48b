"""RF switching times: instants of reference levels, counted from the command's 50 % points.

Levels and terms follow IEEE Std 181: reference levels are shares of the full-on level above zero, and an
instant is where the straight line between two samples of the magnitude passes the level. Where the RF
passes a level several times, `on_time`, `off_time`, `on_delay` and `off_delay` take the first passage in
the edge's interval; what rings or creeps after it is the matter of `on_settling` and `off_settling`.
An instant before the command's 50 % point gives a negative time.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from transim.errors import MeasurementError
from transim.measure.levels import full_on, level_text, off_envelope, on_envelope, voltage_share
from transim.measure.metrics import metric
from transim.measure.record import Record

__all__ = ["fall_time", "off_delay", "off_time", "on_delay", "on_time", "rise_time"]

HIGH = 90
LOW = 10


@metric("on_time", unit="s", title="On time, to 90 % RF")
def on_time(record: Record) -> float:
    """Return the time from the on edge to the first rise of the RF through 90 %.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        The time [s].

    Raises
    ------
    MeasurementError
        If the RF is above 90 % from the start or never reaches it.
    """
    return float(_rises(record, HIGH)[0]) - record.timing.on_edge


@metric("off_time", unit="s", title="Off time, to 10 % RF")
def off_time(record: Record) -> float:
    """Return the time from the off edge to the first fall of the RF through 10 %.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        The time [s].

    Raises
    ------
    MeasurementError
        If the RF is below 10 % from the start or never falls to it.
    """
    return float(_falls(record, LOW)[0]) - record.timing.off_edge


@metric("on_delay", unit="s", title="On delay, to 10 % RF")
def on_delay(record: Record) -> float:
    """Return the time from the on edge to the first rise of the RF through 10 %.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        The time [s].

    Raises
    ------
    MeasurementError
        If the RF is above 10 % from the start or never reaches it.
    """
    return float(_rises(record, LOW)[0]) - record.timing.on_edge


@metric("off_delay", unit="s", title="Off delay, to 90 % RF")
def off_delay(record: Record) -> float:
    """Return the time from the off edge to the first fall of the RF through 90 %.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        The time [s].

    Raises
    ------
    MeasurementError
        If the RF is below 90 % from the start or never falls to it.
    """
    return float(_falls(record, HIGH)[0]) - record.timing.off_edge


@metric("rise_time", unit="s", title="Rise time, 10 to 90 % RF")
def rise_time(record: Record) -> float:
    """Return the time from the last rise through 10 % before the 90 % instant of `on_time` to that instant.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        The time, never negative [s].

    Raises
    ------
    MeasurementError
        If one of the two instants does not exist.
    """
    low, high = _rises(record, LOW), _rises(record, HIGH)[0]
    return float(high - low[low <= high][-1])


@metric("fall_time", unit="s", title="Fall time, 90 to 10 % RF")
def fall_time(record: Record) -> float:
    """Return the time from the last fall through 90 % before the 10 % instant of `off_time` to that instant.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        The time, never negative [s].

    Raises
    ------
    MeasurementError
        If one of the two instants does not exist.
    """
    high, low = _falls(record, HIGH), _falls(record, LOW)[0]
    return float(low - high[high <= low][-1])


def _rises(record: Record, percent: int) -> NDArray[np.float64]:
    """Return the instants at which the RF rises through a level in the on interval, at least one."""
    full, share = full_on(record), voltage_share(record, percent)
    window = on_envelope(record).magnitude()
    begin, highest = float(window.value[0].real), window.extremes()[1]
    if begin >= share * full:
        _refuse_floor(record, full, percent)
        named, found = _named(percent, share), level_text(begin, full)
        raise MeasurementError(
            f"RF is already above {named} when the command changes, at {found} of the on level", level=begin
        )
    instants = window.crossings(share * full, "rising")
    if not instants.size:
        raise MeasurementError(
            f"RF reaches only {level_text(highest, full)} of the on level, not {_named(percent, share)}",
            level=highest,
        )
    return instants


def _falls(record: Record, percent: int) -> NDArray[np.float64]:
    """Return the instants at which the RF falls through a level in the off interval, at least one."""
    full, share = full_on(record), voltage_share(record, percent)
    window = off_envelope(record).magnitude()
    begin, lowest = float(window.value[0].real), window.extremes()[0]
    if begin <= share * full:
        named, found = _named(percent, share), level_text(begin, full)
        raise MeasurementError(
            f"RF is already below {named} when the command changes, at {found} of the on level", level=begin
        )
    instants = window.crossings(share * full, "falling")
    if not instants.size:
        _refuse_floor(record, full, percent)
        raise MeasurementError(
            f"RF falls only to {level_text(lowest, full)} of the on level, not {_named(percent, share)}",
            level=lowest,
        )
    return instants


def _refuse_floor(record: Record, full: float, percent: int) -> None:
    """Raise if even the static off state is above the level."""
    share = voltage_share(record, percent)
    floor = abs(record.static_off or 0.0)
    if floor >= share * full:
        raise MeasurementError(
            f"isolation floor {level_text(floor, full)} of the on level is above {_named(percent, share)}",
            level=floor,
        )


def _named(percent: int, share: float) -> str:
    """Write a level in percent and in dB of the full-on level."""
    return f"{percent} % ({level_text(share, 1.0)})"
