"""RF settling: when the envelope stays in a band, how far it overshoots, when its phase stays.

Times count from the command's 50 % points; the entry into a band is where the straight line between two
samples passes its edge.
"""

from __future__ import annotations

import math

import numpy as np

from transim.errors import MeasurementError
from transim.measure.levels import level_text, off_envelope, on_envelope, static_on
from transim.measure.metrics import metric
from transim.measure.record import Record
from transim.quantities import format_quantity

__all__ = ["off_settling", "on_settling", "overshoot", "phase_settling"]


@metric("on_settling", unit="s", title="On settling, into the band around the on level")
def on_settling(record: Record) -> float:
    """Return the time from the on edge to the last entry of |S21| into the band around the static on level.

    Parameters
    ----------
    record : Record
        The cycle; `definitions.settle_band` is the half width in dB.

    Returns
    -------
    float
        The time [s].

    Raises
    ------
    MeasurementError
        If the RF is outside the band at the end of the on interval, or inside it all the time.
    """
    level, band = abs(static_on(record)), record.definitions.settle_band
    window = on_envelope(record).magnitude()
    low, high = (level * 10.0 ** (sign * band / 20.0) for sign in (-1.0, 1.0))
    end = float(window.value[-1].real)
    width = format_quantity(band, "dB")
    if not low <= end <= high:
        raise MeasurementError(
            f"RF ends the on interval at {level_text(end, level)} of the static on level, outside +-{width}",
            level=end,
        )
    entry = window.last_entry(low, high)
    if entry is None:
        raise MeasurementError(f"RF is within +-{width} of the static on level before the command changes")
    return entry - record.timing.on_edge


@metric("off_settling", unit="s", title="Off settling, below the isolation level")
def off_settling(record: Record) -> float:
    """Return the time from the off edge to the last fall of |S21| below the isolation level.

    Parameters
    ----------
    record : Record
        The cycle; `definitions.isolation_level` is the attenuation in dB, absolute.

    Returns
    -------
    float
        The time [s].

    Raises
    ------
    MeasurementError
        If the RF is above the level at the end of the off interval, or below it all the time.
    """
    attenuation = record.definitions.isolation_level
    level = 10.0 ** (-attenuation / 20.0)
    window = off_envelope(record).magnitude()
    end = float(window.value[-1].real)
    wanted = format_quantity(attenuation, "dB")
    if end > level:
        floor = abs(record.static_off or 0.0)
        if floor > level:
            found = level_text(1.0, floor)
            raise MeasurementError(f"isolation floor {found} is less than {wanted}", level=floor)
        found = level_text(1.0, end)
        raise MeasurementError(f"RF ends the off interval {found} down, not {wanted}", level=end)
    entry = window.last_entry(0.0, level)
    if entry is None:
        raise MeasurementError(f"RF is {wanted} down before the command changes", level=level)
    return entry - record.timing.off_edge


@metric("overshoot", unit="dB", title="Overshoot above the on level")
def overshoot(record: Record) -> float:
    """Return how far |S21| rises above the static on level in the on interval.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        The overshoot, 0 if there is none [dB].

    Raises
    ------
    MeasurementError
        If there is no static on level.
    """
    level = abs(static_on(record))
    highest = on_envelope(record).magnitude().extremes()[1]
    return 20.0 * math.log10(highest / level) if highest > level else 0.0


@metric("phase_settling", unit="s", title="Phase settling, into the band around the on phase")
def phase_settling(record: Record) -> float:
    """Return the time from the on edge to the last entry of the phase into the band around the on phase.

    Parameters
    ----------
    record : Record
        The cycle; `definitions.phase_band` is the half width in degrees.

    Returns
    -------
    float
        The time [s]; 0 if the phase never leaves the band.

    Raises
    ------
    MeasurementError
        If the phase is not known, or outside the band at the end of the on interval.

    Notes
    -----
    Phases are compared modulo 360 degrees; between two samples the phase takes the shorter way. Where the
    envelope is zero it has no phase and counts as outside.
    """
    level = static_on(record)
    window = on_envelope(record)
    if not np.iscomplexobj(window.value):
        raise MeasurementError("the RF envelope of this record has no phase")
    band = math.radians(record.definitions.phase_band)
    phase = np.angle(window.value * np.conj(level))
    outside = np.flatnonzero((np.abs(phase) > band) | (window.value == 0.0))
    if not outside.size:
        return 0.0
    last = int(outside[-1])
    if last == phase.size - 1:
        if window.value[last] == 0.0:
            raise MeasurementError("no RF, so no phase, at the end of the on interval", level=0.0)
        off = format_quantity(math.degrees(phase[last]), "deg", 3)
        raise MeasurementError(f"phase ends the on interval {off} from that of the static on state")
    begin, end = float(window.time[last]), float(window.time[last + 1])
    if window.value[last] == 0.0:
        return begin - record.timing.on_edge
    change = math.remainder(float(phase[last + 1] - phase[last]), 2.0 * math.pi)
    inside = float(phase[last + 1]) + math.copysign(band, change)
    return end - (end - begin) * inside / change - record.timing.on_edge
