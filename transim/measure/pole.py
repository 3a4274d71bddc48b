"""Response of one pole to samples joined by straight lines."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

__all__ = ["single_pole"]

Real = NDArray[np.float64]

#: Largest distance of the response from its chords, as a share of the input's range.
CHORD_ERROR = 1e-5


def single_pole(time: Real, value: Real, bandwidth: float) -> tuple[Real, Real]:
    """Pass straight lines through a single-pole low-pass, exactly.

    Parameters
    ----------
    time : ndarray, shape (n,)
        Instants, strictly increasing [s].
    value : ndarray, shape (n,)
        Finite samples, joined by straight lines; the pole is settled at the first.
    bandwidth : float
        -3 dB frequency of the pole [Hz].

    Returns
    -------
    tuple of ndarray, shape (m,)
        Instants and response. The instants are those of the input, those of each extreme of the response,
        and as many between as a chord error of `CHORD_ERROR` needs.

    Notes
    -----
    On a line from a with the slope s, y = a - s T + s t + K exp(-t/T), T = 1/(2 pi bandwidth): the solution
    of T dy/dt + y = a + s t.
    """
    pole = 2.0 * math.pi * bandwidth
    turns = np.diff(time) * pole  # length of each line in time constants
    decay = np.exp(-turns)
    rise = np.diff(value) * (-np.expm1(-turns) / turns)
    response = _recurrence(decay, value[1:] - rise - decay * value[:-1], float(value[0]))
    slope = np.diff(value) / turns
    bend = response[:-1] - value[:-1] + slope
    line, offset = _bend_points(turns, slope, bend, float(np.ptp(value)) * CHORD_ERROR)
    extra = value[line] + slope[line] * (offset - 1.0) + bend[line] * np.exp(-offset)
    instants = np.concatenate((time, time[line] + offset / pole))
    order = np.unique(instants, return_index=True)[1]
    return instants[order], np.concatenate((response, extra))[order]


def _recurrence(factor: Real, drive: Real, first: float) -> Real:
    """Return y[0] = first, y[k+1] = factor[k] y[k] + drive[k], all at once.

    Each pass joins spans of twice the length; factors up to 1 keep it stable.
    """
    factor = np.concatenate(([0.0], factor))
    result = np.concatenate(([first], drive))
    reach = 1
    while reach < result.size:
        result[reach:] = result[reach:] + factor[reach:] * result[:-reach]
        factor[reach:] = factor[reach:] * factor[:-reach]
        reach *= 2
    return result


def _bend_points(turns: Real, slope: Real, bend: Real, error: float) -> tuple[NDArray[np.intp], Real]:
    """Place instants on the lines of a response, where its exponential bends.

    Parameters
    ----------
    turns : ndarray, shape (n,)
        Length of each line [time constants].
    slope, bend : ndarray, shape (n,)
        s T and K of each line.
    error : float
        Largest distance of the response from its chords.

    Returns
    -------
    tuple of ndarray
        Index of the line and offset in it [time constants], of each instant.

    Notes
    -----
    The chord error over du is |K| exp(-u) du^2/8, its area that times 2 du/3. Even steps q of exp(-u/3)
    make the area the same for each chord and the error 9 |K| q^2/8 at most.
    """
    reach = -np.expm1(-np.minimum(turns, 60.0) / 3.0)
    pieces = np.zeros(turns.size)
    if error > 0.0:
        pieces = np.maximum(np.ceil(reach * np.sqrt(1.125 * np.abs(bend) / error)) - 1.0, 0.0)
    count = pieces.astype(np.intp)
    line = np.repeat(np.arange(turns.size), count)
    number = np.arange(line.size) - np.repeat(np.cumsum(count) - count, count) + 1
    offset = -3.0 * np.log1p(-reach[line] * number / (count[line] + 1))
    turning = np.flatnonzero((slope * bend > 0.0) & (np.abs(bend) > np.abs(slope)))
    extreme = np.log(np.abs(bend[turning])) - np.log(np.abs(slope[turning]))
    inner = extreme < turns[turning]
    return np.concatenate((line, turning[inner])), np.concatenate((offset, extreme[inner]))
