"""Change over between the throws of a path: how long both conduct, and how long none does."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from transim.errors import MeasurementError
from transim.measure.levels import on_envelope, static_on, voltage_share
from transim.measure.metrics import metric
from transim.measure.record import Record
from transim.measure.waveform import Waveform

__all__ = ["throw_gap", "throw_overlap"]

Span = tuple[float, float]
#: A gap below this share of the interval, or of an instant, is rounding.
_ROUNDING = 1e-12


@metric("throw_overlap", unit="s", title="This throw and another both conducting after its on edge", analysis="throws")
def throw_overlap(record: Record) -> float:
    """Return how long this throw and at least one other conduct at the same time, from its on edge to the next edge.

    A throw conducts while its RF is at 10 % of its own settled on level or above, by voltage or power as the
    definitions say.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        The time [s]; 0 where the others break before this one makes.

    Raises
    ------
    MeasurementError
        If there is no other throw, or another isolates too little to be said to break.
    """
    own, others = _conducting(record)
    return sum(stop - start for start, stop in _common(own, _joined(others)))


@metric("throw_gap", unit="s", title="No throw conducting after the on edge of this one", analysis="throws")
def throw_gap(record: Record) -> float:
    """Return how long no throw conducts, from the on edge of this throw to the next edge.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    float
        The time [s]; 0 where this throw makes before the others break.

    Raises
    ------
    MeasurementError
        If there is no other throw, or another isolates too little to be said to break.
    """
    own, others = _conducting(record)
    start, stop = record.timing.on_window()
    conducting = _joined([own, *others])
    edges = [start, *(instant for span in conducting for instant in span), stop]
    gaps = [end - begin for begin, end in zip(edges[::2], edges[1::2], strict=True)]
    return sum(gap for gap in gaps if gap > _ROUNDING * (stop - start))


def _conducting(record: Record) -> tuple[list[Span], list[list[Span]]]:
    """Return when this throw conducts in the interval of its on edge, and when each other one does."""
    if not record.other_throws:
        raise MeasurementError("the path has a single way for the RF")
    share = voltage_share(record, 10)
    window = record.timing.on_window()
    envelope = on_envelope(record).magnitude()
    own = _above(envelope, share * abs(static_on(record)))
    others = []
    for name, level in record.other_throws.items():
        part = level.between(*window)
        if part.value[-1].real >= share:
            raise MeasurementError(f"throw {name} does not fall below 10 % while this one is on")
        others.append(_above(part, share))
    return own, others


def _above(wave: Waveform, level: float) -> list[Span]:
    """Return the intervals in which a waveform is at a level or above."""
    time, height = wave.time, wave.value.real - level
    low, high = np.minimum(height[:-1], height[1:]), np.maximum(height[:-1], height[1:])
    some = np.flatnonzero(high > 0.0)
    # of a segment that goes through the level, the share that is above it
    share = np.where(low[some] >= 0.0, 1.0, high[some] / np.where(low[some] >= 0.0, 1.0, high[some] - low[some]))
    length = share * (time[some + 1] - time[some])
    rising = height[some + 1] >= height[some]
    starts = np.where(rising, time[some + 1] - length, time[some])
    stops = starts + length
    # neighbouring segments meet but for rounding
    apart = starts[1:] > stops[:-1] + _ROUNDING * np.abs(stops[:-1])
    first, last = np.flatnonzero(np.append(True, apart)), np.flatnonzero(np.append(apart, True))
    return [(float(starts[a]), float(stops[b])) for a, b in zip(first, last, strict=True)] if some.size else []


def _joined(several: Sequence[Sequence[Span]]) -> list[Span]:
    """Return the union of intervals."""
    found: list[Span] = []
    for start, stop in sorted(span for spans in several for span in spans):
        if found and start <= found[-1][1]:
            found[-1] = found[-1][0], max(found[-1][1], stop)
        else:
            found.append((start, stop))
    return found


def _common(first: Sequence[Span], second: Sequence[Span]) -> list[Span]:
    """Return where intervals of both overlap."""
    return [(max(a, c), min(b, d)) for a, b in first for c, d in second if max(a, c) < min(b, d)]
