"""Video leakage: what the control pulse itself puts into the terminated RF ports while the RF is off.

All figures but `video_inband` see the voltage after the single pole of `definitions.video_bandwidth`, the
bandwidth of the instrument; `video_inband` has a bandwidth of its own. The figures of an edge are taken
from the begin of that command edge to the begin of the next one or to the end of the cycle.
"""

from __future__ import annotations

import math

from transim.errors import MeasurementError
from transim.measure.metrics import metric
from transim.measure.record import Record
from transim.measure.waveform import Waveform
from transim.quantities import format_quantity

__all__ = [
    "video_area",
    "video_energy",
    "video_inband",
    "video_peak",
    "video_peak_off",
    "video_peak_on",
    "video_swing",
    "video_width",
]


@metric("video_peak", unit="V", title="Video leakage, peak")
def video_peak(record: Record) -> float:
    """Return the largest leakage voltage of either sign, at any RF port after either edge.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        Magnitude of the peak [V].

    Raises
    ------
    MeasurementError
        If there is no video waveform or a sample of one is not finite.
    """
    return max(abs(wave.peak()[1]) for wave in _both_edges(record))


@metric("video_peak_on", unit="V", title="Video leakage, peak at the on edge")
def video_peak_on(record: Record) -> float:
    """Return the largest leakage voltage of either sign, at any RF port after the on edge.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        Magnitude of the peak [V].

    Raises
    ------
    MeasurementError
        If there is no video waveform or a sample of one is not finite.
    """
    return max(abs(wave.peak()[1]) for wave in _cuts(record, record.timing.on_window()))


@metric("video_peak_off", unit="V", title="Video leakage, peak at the off edge")
def video_peak_off(record: Record) -> float:
    """Return the largest leakage voltage of either sign, at any RF port after the off edge.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        Magnitude of the peak [V].

    Raises
    ------
    MeasurementError
        If there is no video waveform or a sample of one is not finite.
    """
    return max(abs(wave.peak()[1]) for wave in _cuts(record, record.timing.off_window()))


@metric("video_swing", unit="V", title="Video leakage, peak to peak")
def video_swing(record: Record) -> float:
    """Return the peak-to-peak leakage voltage over both edges, at the RF port where it is largest.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        Highest less lowest voltage [V].

    Raises
    ------
    MeasurementError
        If there is no video waveform or a sample of one is not finite.
    """
    begin = min(record.timing.on_window()[0], record.timing.off_window()[0])
    spans = [wave.extremes() for wave in _cuts(record, (begin, record.timing.stop))]
    return max(high - low for low, high in spans)


@metric("video_area", unit="V s", title="Video leakage, area")
def video_area(record: Record) -> float:
    """Return the largest area of the leakage of one edge at one RF port.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        Magnitude of the time integral of the voltage over the interval of an edge [V s].

    Raises
    ------
    MeasurementError
        If there is no video waveform or a sample of one is not finite.
    """
    return max(abs(wave.integral()) for wave in _both_edges(record))


@metric("video_energy", unit="J", title="Video leakage, energy")
def video_energy(record: Record) -> float:
    """Return the energy that the leakage delivers to an RF port in the cycle, at the worst port.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        Integral of v^2/Z0 over the judged cycle [J].

    Raises
    ------
    MeasurementError
        If there is no video waveform or a sample of one is not finite.
    """
    cycle = _cuts(record, (record.timing.start, record.timing.stop))
    return max(wave.square_integral() for wave in cycle) / record.impedance


@metric("video_width", unit="s", title="Video leakage, width at half peak")
def video_width(record: Record) -> float:
    """Return the full width at half magnitude of the largest peak, at its RF port and edge.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        The width [s].

    Raises
    ------
    MeasurementError
        If there is no leakage, or it does not fall to half the peak on both sides within the edge's
        interval.
    """
    wave = max(_both_edges(record), key=lambda wave: abs(wave.peak()[1]))
    instant, peak = wave.peak()
    if peak == 0.0:
        raise MeasurementError("no video leakage", level=0.0)
    size = Waveform(wave.time, wave.value * math.copysign(1.0, peak), "V")
    before = size.crossings(abs(peak) / 2.0, "rising")
    after = size.crossings(abs(peak) / 2.0, "falling")
    before, after = before[before <= instant], after[after >= instant]
    if not (before.size and after.size):
        side = "after" if before.size else "before"
        raise MeasurementError(
            f"leakage is not down to half its {format_quantity(peak, 'V')} peak {side} it, within the edge's "
            "interval",
            level=peak / 2.0,
        )
    return float(after[0] - before[-1])


@metric("video_inband", unit="dBm", title="Video leakage in band")
def video_inband(record: Record) -> float:
    """Return the leakage's power at the carrier, in the resolution bandwidth, at the worst RF port.

    Parameters
    ----------
    record : Record
        The cycle; `timing.period` gives the repetition rate P, `definitions.resolution_bandwidth` B.

    Returns
    -------
    float
        The power [dBm].

    Raises
    ------
    MeasurementError
        If there is no video waveform, a sample of one is not finite, or nothing leaks at the carrier.

    Notes
    -----
    One line of the spectrum carries 2 (P |V(f)|)^2/Z0, V(f) the Fourier integral of one cycle less its
    resting voltage at the end; a receiver sees the lines within B, so the power is that of one line times
    max(1, B/P). The voltage is taken before the video filter.
    """
    rate = 1.0 / record.timing.period
    largest = 0.0
    for wave in _ports(record).values():
        cycle = wave.between(record.timing.start, record.timing.stop)
        moved = Waveform(cycle.time, cycle.value - cycle.value[-1], "V")
        largest = max(largest, abs(moved.fourier(record.carrier)))
    power = 2.0 * (rate * largest) ** 2 / record.impedance
    power *= max(1.0, record.definitions.resolution_bandwidth / rate)
    if power <= 0.0:
        raise MeasurementError(f"no leakage at {format_quantity(record.carrier, 'Hz')}", level=0.0)
    return 10.0 * math.log10(power / 1e-3)


def _ports(record: Record) -> dict[str, Waveform]:
    """Return the voltages at the RF ports as recorded, at least one."""
    if not record.video:
        raise MeasurementError("no video waveform in this record")
    return dict(record.video)


def _cuts(record: Record, *windows: tuple[float, float]) -> list[Waveform]:
    """Return the filtered voltage of each RF port in each interval."""
    bandwidth = record.definitions.video_bandwidth
    waves = _ports(record).values()
    filtered = waves if bandwidth is None else [wave.lowpass(bandwidth) for wave in waves]
    return [wave.between(*window) for wave in filtered for window in windows]


def _both_edges(record: Record) -> list[Waveform]:
    """Return the filtered voltage of each RF port in the interval of each edge."""
    return _cuts(record, record.timing.on_window(), record.timing.off_window())
