"""Usable band: the frequencies at which the limits on both settled states hold together."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from transim.measure.limits import Limit
from transim.measure.sweep import StaticSweep

__all__ = ["Band", "usable_bands"]

Array = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Band:
    """An interval of frequency.

    Attributes
    ----------
    low, high : float
        Its ends [Hz].
    low_limit, high_limit : str or None
        Metric whose limit is missed beyond that end; None where the sweep itself ends there.
    """

    low: float
    high: float
    low_limit: str | None = None
    high_limit: str | None = None


def usable_bands(sweep: StaticSweep, limits: Sequence[Limit]) -> tuple[Band, ...] | None:
    """Find where loss, isolation and match limits hold together.

    Parameters
    ----------
    sweep : StaticSweep
        Both states against frequency.
    limits : sequence of Limit
        Of the design; those on ``insertion_loss``, ``isolation``, ``return_loss_on`` and ``return_loss_off``
        count, return losses at the worst port.

    Returns
    -------
    tuple of Band or None
        Increasing and apart, empty where the limits never hold together; None where the design limits none of
        the four. Between samples the decibels are taken as straight lines over the logarithm of frequency.
    """
    figures = sweep.figures()
    axis = np.log(sweep.frequency)
    bands: list[Band] | None = None
    for limit in limits:
        if limit.metric not in figures:
            continue
        values = figures[limit.metric]
        bounds = ((1.0, limit.min), (-1.0, limit.max))
        margins = [sign * (values - bound) for sign, bound in bounds if bound is not None]
        for margin in np.hstack(margins).T:
            held = _held(axis, margin, limit.metric)
            bands = held if bands is None else _common(bands, held)
    if bands is None:
        return None
    ends = float(sweep.frequency[0]), float(sweep.frequency[-1])
    # the exponential of a logarithm is off by its last digit; the ends of the sweep are known exactly
    return tuple(
        Band(
            ends[0] if band.low_limit is None else float(np.exp(band.low)),
            ends[1] if band.high_limit is None else float(np.exp(band.high)),
            band.low_limit,
            band.high_limit,
        )
        for band in bands
    )


def _held(axis: Array, margin: Array, metric: str) -> list[Band]:
    """Return the intervals of one axis in which a margin is not negative."""
    inside = margin >= 0.0
    bands: list[Band] = []
    start, cause = float(axis[0]), None
    for k in range(axis.size - 1):
        if inside[k] == inside[k + 1]:
            continue
        share = margin[k] / (margin[k] - margin[k + 1])
        crossing = float(axis[k] + share * (axis[k + 1] - axis[k]))
        if inside[k + 1]:
            start, cause = crossing, metric
        elif crossing > start:
            bands.append(Band(start, crossing, cause, metric))
    if inside[-1] and axis[-1] > start:
        bands.append(Band(start, float(axis[-1]), cause, None))
    return bands


def _common(first: Sequence[Band], second: Sequence[Band]) -> list[Band]:
    """Return what two sets of intervals have in common."""
    found = []
    for a in first:
        for b in second:
            low, low_limit = max((a.low, a.low_limit), (b.low, b.low_limit), key=lambda end: end[0])
            high, high_limit = min((a.high, a.high_limit), (b.high, b.high_limit), key=lambda end: end[0])
            if high > low:
                found.append(Band(low, high, low_limit, high_limit))
    return found
