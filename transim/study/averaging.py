"""What a mean over the carrier period changes: the envelope of an instant against that which a detector can see."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace

import numpy as np

from transim.envelope.average import period_average
from transim.errors import MeasurementError
from transim.measure.metrics import Figure
from transim.measure.pulse import off_time, on_time
from transim.measure.record import Record
from transim.measure.waveform import Waveform
from transim.quantities import format_quantity

__all__ = ["averaged_envelope", "averaged_time", "averaging_notes"]

#: A change by less than this share is not worth a word.
_WORTH = 0.01
_TIMES = {"on_time": on_time, "off_time": off_time}


def averaged_envelope(envelope: Waveform, carrier: float, times: int) -> Waveform:
    """Return an envelope averaged over one carrier period around each instant.

    Parameters
    ----------
    envelope : Waveform
        Complex S.
    carrier : float
        [Hz].
    times : int
        How often; the carrier analysis does it twice.
    """
    for _ in range(times):
        value = np.asarray(envelope.value, dtype=complex)[:, None, None]
        mean = period_average(envelope.time, value, 1.0 / carrier, envelope.time)
        envelope = Waveform(envelope.time, mean[:, 0, 0], envelope.unit)
    return envelope


def averaged_time(record: Record, measure: Callable[[Record], float], averaged: int) -> float | None:
    """Return a time of the envelope averaged as the carrier analysis does, twice over one period.

    Parameters
    ----------
    record : Record
        By the envelope analysis.
    measure : callable
        A metric.
    averaged : int
        How often its envelope has been averaged.

    Returns
    -------
    float or None
        [s]; None where it does not exist.
    """
    if record.envelope is None:
        return None
    seen = averaged_envelope(record.envelope, record.carrier, 2 - averaged)
    try:
        return measure(replace(record, envelope=seen))
    except MeasurementError:
        return None


def averaging_notes(record: Record, figures: Mapping[str, Figure], averaged: int) -> tuple[str, ...]:
    """Say which times move where the envelope is averaged as the carrier analysis does, twice over one period.

    Parameters
    ----------
    record : Record
        By the envelope analysis.
    figures : mapping of str to Figure
        What was measured on it.
    averaged : int
        How often its envelope has been averaged.

    Returns
    -------
    tuple of str
        One sentence for each time that moves by more than 1 %.
    """
    notes = []
    for name, measure in _TIMES.items():
        value = figures[name].value if name in figures else None
        if value is None:
            continue
        other = averaged_time(record, measure, averaged)
        if other is not None and abs(other - value) > _WORTH * abs(value):
            notes.append(
                f"{name} is that of the envelope at each instant; a mean over the carrier period, as the carrier "
                f"analysis takes it, makes it {format_quantity(other, 's')} ({other / value - 1.0:+.1%})"
            )
    return tuple(notes)
