"""Mean powers that stay in the junctions and in the driver."""

from __future__ import annotations

import numpy as np

from transim.errors import MeasurementError
from transim.measure.cycle import period_mean
from transim.measure.metrics import metric
from transim.measure.record import Record
from transim.measure.waveform import Waveform

__all__ = ["driver_dissipation", "junction_dissipation", "kept_power"]


@metric("junction_dissipation", unit="W", title="Junction dissipation, worst junction")
def junction_dissipation(record: Record) -> float:
    """Return the mean power into the junction that takes most, at the command's period.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        Mean of the sum of voltage times current over its terminals, without RF [W]. Where the judged cycle is
        shorter than the period, the power at its end is held for the rest.

    Raises
    ------
    MeasurementError
        If no junction power is recorded or a sample is not finite.
    """
    if not record.junction_power:
        raise MeasurementError("no junction power in this record")
    return max(period_mean(power, record.timing) for power in record.junction_power.values())


@metric("driver_dissipation", unit="W", title="Driver dissipation")
def driver_dissipation(record: Record) -> float:
    """Return the mean power that stays in the driver, at the command's period.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        Power of all supplies less the power out of the driver [W]; its command input is not counted.

    Raises
    ------
    MeasurementError
        If the driver has no supply, its output power is not recorded or a sample is not finite.
    """
    return period_mean(kept_power(record), record.timing)


def kept_power(record: Record) -> Waveform:
    """Return the power that stays in the driver.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    Waveform
        Power of all supplies less the power out of the driver, on the instants of the former [W].

    Raises
    ------
    MeasurementError
        If the driver has no supply, its output power is not recorded, or the two are complex.
    """
    if record.supply_power is None:
        raise MeasurementError("the driver has no supply")
    if record.driver_output_power is None:
        raise MeasurementError("no driver output power in this record")
    supplied, out = record.supply_power, record.driver_output_power
    # a sample that is not finite stays one, and is reported where it is used
    with np.errstate(invalid="ignore"):
        kept = supplied.value - np.interp(supplied.time, out.time, out.value)
    return Waveform(supplied.time, kept, "W")
