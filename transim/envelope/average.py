"""Mean of an envelope over the carrier period."""

from __future__ import annotations

import numpy as np

from transim.envelope.junction import Array
from transim.envelope.scatter import Complex

__all__ = ["period_average"]


def period_average(time: Array, s: Complex, width: float, samples: Array) -> Complex:
    """Return the mean over one carrier period around each sample.

    What moves within one carrier period is no envelope: where a junction lets go in less, the exact solution is a
    spike (RF shifts the instant of the step), which a carrier-resolved extraction averages in the same way.

    Parameters
    ----------
    time : ndarray, shape (n,)
        Increasing [s].
    s : ndarray of complex, shape (n, p, p)
        S-parameters, straight between the instants.
    width : float
        The period [s].
    samples : ndarray, shape (k,)
        Where the mean is wanted [s]; at the ends of the waveform over what there is of the period.

    Returns
    -------
    ndarray of complex, shape (k, p, p)
    """
    area = np.zeros_like(s)
    area[1:] = np.cumsum(0.5 * (s[1:] + s[:-1]) * np.diff(time)[:, None, None], axis=0)
    first, last = np.maximum(samples - width / 2.0, time[0]), np.minimum(samples + width / 2.0, time[-1])
    mean = np.empty((samples.size, *s.shape[1:]), dtype=complex)
    for row in range(s.shape[1]):
        for column in range(s.shape[2]):
            sums = [_integral(time, s[:, row, column], area[:, row, column], end) for end in (first, last)]
            mean[:, row, column] = (sums[1] - sums[0]) / (last - first)
    return mean


def _integral(time: Array, value: Complex, area: Complex, end: Array) -> Complex:
    """Return the integral of a piecewise-linear waveform from its start to each end [s]."""
    place = np.clip(np.searchsorted(time, end, side="right") - 1, 0, time.size - 2)
    inside = end - time[place]
    slope = (value[place + 1] - value[place]) / (time[place + 1] - time[place])
    return np.asarray(area[place] + inside * (value[place] + 0.5 * slope * inside))
