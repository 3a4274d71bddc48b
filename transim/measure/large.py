"""Large signal: what changes at the real level, from carrier-resolved runs."""

from __future__ import annotations

import math

import numpy as np

from transim.errors import MeasurementError
from transim.measure.levels import end_level, off_envelope, on_envelope, static_on
from transim.measure.metrics import metric
from transim.measure.pulse import off_delay, off_time, on_delay, on_time
from transim.measure.record import Record
from transim.measure.rf import LargeSignal

__all__ = [
    "bias_shift_off",
    "bias_shift_on",
    "hot_switching_energy",
    "hot_switching_peak",
    "level_isolation",
    "level_loss",
    "on_compression",
]


def _large(record: Record) -> LargeSignal:
    if record.large is None:
        raise MeasurementError("known to the carrier analysis only")
    return record.large


@metric("level_loss", unit="dB", title="Loss at the stated level, end of the on interval", analysis="carrier")
def level_loss(record: Record) -> float:
    """Return the loss at the end of the on interval at the real level [dB]."""
    _large(record)
    return _decibels(abs(end_level(record, on_envelope(record))))


@metric(
    "level_isolation",
    unit="dB",
    title="Isolation at the stated level, end of the off interval",
    analysis="carrier",
)
def level_isolation(record: Record) -> float:
    """Return the isolation at the end of the off interval at the real level [dB]."""
    _large(record)
    return _decibels(abs(end_level(record, off_envelope(record))))


@metric(
    "on_compression",
    unit="dB",
    title="Loss at the stated level above the small-signal loss",
    analysis="carrier",
)
def on_compression(record: Record) -> float:
    """Return by how much the loss at the real level exceeds that of the static on state [dB].

    It is taken at the end of the on interval: what the path then lacks of settling is part of it at any level.
    """
    return level_loss(record) - _decibels(abs(static_on(record)))


@metric("bias_shift_on", unit="V", title="Mean bias moved by the RF, RF on", analysis="carrier")
def bias_shift_on(record: Record) -> float:
    """Return the change of the mean voltage at the bias entry by the RF, at the end of the on interval [V]."""
    return _large(record).bias_shift_on


@metric("bias_shift_off", unit="V", title="Mean bias moved by the RF, RF off", analysis="carrier")
def bias_shift_off(record: Record) -> float:
    """Return the change of the mean voltage at the bias entry by the RF, at the end of the off interval [V]."""
    return _large(record).bias_shift_off


@metric(
    "hot_switching_peak",
    unit="W",
    title="Power into a junction, largest mean over a carrier period",
    analysis="carrier",
)
def hot_switching_peak(record: Record) -> float:
    """Return the largest power into any junction during the cycle, as mean over one carrier period [W]."""
    start, stop = record.timing.start, record.timing.stop
    peaks = []
    for power in _large(record).junction_power.values():
        inside = (power.time >= start) & (power.time <= stop)
        peaks.append(float(np.max(power.value[inside])))
    return max(peaks)


@metric(
    "hot_switching_energy",
    unit="J",
    title="Energy into a junction while RF is between 10 and 90 %",
    analysis="carrier",
)
def hot_switching_energy(record: Record) -> float:
    """Return the energy that goes into the worst junction while RF is between 10 and 90 %, both edges [J]."""
    large, timing = _large(record), record.timing
    spans = (
        (timing.on_edge + on_delay(record), timing.on_edge + on_time(record)),
        (timing.off_edge + off_delay(record), timing.off_edge + off_time(record)),
    )
    return max(
        sum(float(np.real(power.between(*span).integral())) for span in spans)
        for power in large.junction_power.values()
    )


def _decibels(magnitude: float) -> float:
    if magnitude <= 0.0:
        raise MeasurementError("no RF at all: the level is infinitely low")
    return -20.0 * math.log10(magnitude)
