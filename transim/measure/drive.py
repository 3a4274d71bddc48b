"""What the driver delivers and what the junctions hold."""

from __future__ import annotations

from collections.abc import Mapping

from transim.errors import MeasurementError
from transim.measure.cycle import period_mean
from transim.measure.metrics import metric
from transim.measure.pulse import off_time, on_time
from transim.measure.record import Record
from transim.measure.waveform import Waveform

__all__ = [
    "driver_charge_off",
    "driver_charge_on",
    "driver_power",
    "driver_sink_peak",
    "driver_source_peak",
    "junction_charge",
    "junction_current_peak",
    "junction_reverse",
    "supply_current_peak",
]


@metric("driver_source_peak", unit="A", title="Driver current, largest sourced")
def driver_source_peak(record: Record) -> float:
    """Return the largest current that the driver sources in the cycle.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        Largest current out of the driver, 0 if it never sources [A].

    Raises
    ------
    MeasurementError
        If the current is not recorded or a sample is not finite.
    """
    return max(0.0, _current(record).between(record.timing.start, record.timing.stop).extremes()[1])


@metric("driver_sink_peak", unit="A", title="Driver current, largest sunk")
def driver_sink_peak(record: Record) -> float:
    """Return the largest current that the driver sinks in the cycle.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        Largest current into the driver as a positive number, 0 if it never sinks [A].

    Raises
    ------
    MeasurementError
        If the current is not recorded or a sample is not finite.
    """
    return max(0.0, -_current(record).between(record.timing.start, record.timing.stop).extremes()[0])


@metric("driver_charge_on", unit="C", title="Driver charge to turn on")
def driver_charge_on(record: Record) -> float:
    """Return the charge that the driver moves from the begin of the on edge to the `on_time` instant.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        The charge [C]; positive when it goes the usual way: out of the driver where the RF passes under
        forward bias, into it where the RF passes without.

    Raises
    ------
    MeasurementError
        If the current is not recorded or `on_time` is undefined.
    """
    begin = record.timing.on_window()[0]
    try:
        instant = record.timing.on_edge + on_time(record)
    except MeasurementError as reason:
        raise MeasurementError(f"on_time is undefined: {reason.message}") from reason
    return _moved(record, begin, instant, outward=record.biased_passes)


@metric("driver_charge_off", unit="C", title="Driver charge to turn off")
def driver_charge_off(record: Record) -> float:
    """Return the charge that the driver moves from the begin of the off edge to the `off_time` instant.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        The charge [C]; positive when it goes the usual way: into the driver where the RF passes under
        forward bias, out of it where the RF passes without.

    Raises
    ------
    MeasurementError
        If the current is not recorded or `off_time` is undefined.
    """
    begin = record.timing.off_window()[0]
    try:
        instant = record.timing.off_edge + off_time(record)
    except MeasurementError as reason:
        raise MeasurementError(f"off_time is undefined: {reason.message}") from reason
    return _moved(record, begin, instant, outward=not record.biased_passes)


@metric("driver_power", unit="W", title="Driver supply power")
def driver_power(record: Record) -> float:
    """Return the mean power that all supplies deliver, at the command's period.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        The mean power [W]. Where the judged cycle is shorter than the period, the power at its end is
        held for the rest.

    Raises
    ------
    MeasurementError
        If the driver has no supply or a sample is not finite.
    """
    if record.supply_power is None:
        raise MeasurementError("the driver has no supply")
    return period_mean(record.supply_power, record.timing)


@metric("junction_charge", unit="C", title="Junction charge when conducting")
def junction_charge(record: Record) -> float:
    """Return the largest charge that a junction holds at the end of its conducting interval.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        The charge [C]. A junction conducts in that one of the two intervals at whose end it holds more.

    Raises
    ------
    MeasurementError
        If no charge is recorded or a sample is not finite.
    """
    if not record.junction_charge:
        raise MeasurementError("no junction charge in this record")
    ends = (record.timing.on_window()[1], record.timing.off_window()[1])
    return max(wave.at(end).real for wave in record.junction_charge.values() for end in ends)


@metric("junction_reverse", unit="V", title="Junction reverse voltage, largest")
def junction_reverse(record: Record) -> float:
    """Return the largest reverse voltage across any junction in the cycle.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        The voltage, 0 if no junction is ever reverse biased [V].

    Raises
    ------
    MeasurementError
        If no junction voltage is recorded or a sample is not finite.
    """
    if not record.junction_reverse:
        raise MeasurementError("no junction voltage in this record")
    cycle = record.timing.start, record.timing.stop
    return max(0.0, *(wave.between(*cycle).extremes()[1] for wave in record.junction_reverse.values()))


@metric("junction_current_peak", unit="A", title="Junction forward current, largest")
def junction_current_peak(record: Record) -> float:
    """Return the largest forward current of any junction in the cycle.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        Current into the anode, of a transistor through its base; displacement current included, 0 if no
        junction ever conducts forward [A].

    Raises
    ------
    MeasurementError
        If no junction current is recorded or a sample is not finite.
    """
    return max(0.0, _largest(record, record.junction_current, "junction current"))


@metric("supply_current_peak", unit="A", title="Supply current, largest of any supply")
def supply_current_peak(record: Record) -> float:
    """Return the largest current of either direction in any supply.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        Magnitude of the current [A].

    Raises
    ------
    MeasurementError
        If no supply current is recorded or a sample is not finite.
    """
    sizes = {name: wave.magnitude() for name, wave in record.supply_current.items()}
    return _largest(record, sizes, "supply current")


def _current(record: Record) -> Waveform:
    if record.drive_current is None:
        raise MeasurementError("no driver current in this record")
    return record.drive_current


def _moved(record: Record, begin: float, end: float, *, outward: bool) -> float:
    """Return the charge that leaves the driver between two instants, or enters it if not `outward`."""
    current = _current(record)
    charge = current.between(begin, end).integral() if end > begin else 0.0
    return charge if outward else -charge


def _largest(record: Record, waves: Mapping[str, Waveform], what: str) -> float:
    if not waves:
        raise MeasurementError(f"no {what} in this record")
    cycle = record.timing.start, record.timing.stop
    return max(wave.between(*cycle).extremes()[1] for wave in waves.values())
