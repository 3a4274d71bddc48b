"""Reference levels of the RF, and the parts of the envelope that belong to each edge."""

from __future__ import annotations

import math

from transim.errors import MeasurementError
from transim.measure.record import Record
from transim.measure.waveform import Waveform
from transim.quantities import format_quantity

__all__ = ["end_level", "full_on", "level_text", "off_envelope", "on_envelope", "static_on", "voltage_share"]


def on_envelope(record: Record) -> Waveform:
    """Return the envelope between the on edge and the next off edge.

    Parameters
    ----------
    record : Record
        The cycle.


    Returns
    -------
    Waveform
        S21 in the interval of the on edge.

    Raises
    ------
    MeasurementError
        If there is no envelope or the interval is not in it.
    """
    return _envelope(record).between(*record.timing.on_window())


def off_envelope(record: Record) -> Waveform:
    """Return the envelope between the off edge and the next on edge.

    Parameters
    ----------
    record : Record
        The cycle.


    Returns
    -------
    Waveform
        S21 in the interval of the off edge.

    Raises
    ------
    MeasurementError
        If there is no envelope or the interval is not in it.
    """
    return _envelope(record).between(*record.timing.off_window())


def _envelope(record: Record) -> Waveform:
    if record.envelope is None:
        raise MeasurementError("no RF envelope in this record")
    return record.envelope


def static_on(record: Record) -> complex:
    """Return S21 of the static on state, finite and not zero.

    Parameters
    ----------
    record : Record
        The cycle.


    Returns
    -------
    complex
        S21, finite and not zero.

    Raises
    ------
    MeasurementError
        If it is not recorded, not finite or zero.
    """
    if record.static_on is None:
        raise MeasurementError("no static on level in this record")
    if not math.isfinite(abs(record.static_on)):
        raise MeasurementError("S21 of the static on state is not a finite number")
    if record.static_on == 0.0:
        raise MeasurementError("no RF passes in the static on state", level=0.0)
    return record.static_on


def end_level(record: Record, envelope: Waveform) -> complex:
    """Return the envelope at the end of an interval.

    Parameters
    ----------
    record : Record
        The cycle.
    envelope : Waveform
        Of one interval.

    Returns
    -------
    complex
        Its last sample; of a carrier-resolved run, whose average reaches over one carrier period, the one that does
        not yet see the next edge.
    """
    reach = 0.0 if record.large is None else 1.0 / record.carrier
    latest = float(envelope.time[-1]) - reach
    return complex(envelope.at(max(latest, float(envelope.time[0]))))


def full_on(record: Record) -> float:
    """Return the level that is 100 %, by `definitions.reference`.

    Parameters
    ----------
    record : Record
        The cycle.


    Returns
    -------
    float
        |S21| of the full-on level.

    Raises
    ------
    MeasurementError
        If there is none.
    """
    if record.definitions.reference == "static":
        return abs(static_on(record))
    level = abs(end_level(record, on_envelope(record)))
    if level <= 0.0:
        raise MeasurementError("no RF passes at the end of the on interval", level=0.0)
    return level


def voltage_share(record: Record, percent: int) -> float:
    """Return a level as a share of the full-on voltage.

    Parameters
    ----------
    record : Record
        The cycle.
    percent : int
        The level in percent of voltage or power, by `definitions.basis`.


    Returns
    -------
    float
        The share of the voltage, 0 to 1.
    """
    share = percent / 100.0
    return math.sqrt(share) if record.definitions.basis == "power" else share


def level_text(magnitude: float, full: float) -> str:
    """Write a level in dB of another.

    Parameters
    ----------
    magnitude, full : float
        The two levels, as voltages.


    Returns
    -------
    str
        For example "-3.01 dB"; "zero" if there is no such number.
    """
    if magnitude <= 0.0 or full <= 0.0:
        return "zero"
    return format_quantity(20.0 * math.log10(magnitude / full), "dB", 3)
