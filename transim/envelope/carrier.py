"""Complex envelope from carrier-resolved runs.

Two runs with the carrier in quadrature, less the run without RF, hold the complex envelope without the video: for
a response H(t) to the carrier, the runs at 0 and 90 deg give Re H exp(jwt) and -Im H exp(jwt). What is left of the
start-up and switching transients depends on the phase and lies at baseband. A moving average over one period removes
what is constant there, a second one what changes evenly: a p-i-n path that turns on holds such a part for
many periods, and one average alone shifts its times by 1 %.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from transim.envelope.junction import Array

__all__ = ["extract_envelope"]


def extract_envelope(
    runs: tuple[tuple[Array, Array], tuple[Array, Array], tuple[Array, Array]], carrier: float, points: int
) -> tuple[Array, npt.NDArray[np.complex128]]:
    """Return the complex envelope of a node voltage.

    Parameters
    ----------
    runs : three pairs of ndarray
        Time [s] and voltage [V] of the runs at 0 deg, at 90 deg and without RF.
    carrier : float
        Frequency [Hz].
    points : int
        Samples a period on which the runs are put; even.

    Returns
    -------
    time : ndarray, shape (n,)
        Four samples a period [s].
    envelope : ndarray of complex, shape (n,)
        Peak phasor against cos(w t) [V].
    """
    # half a second to import, which no other analysis needs
    from scipy.interpolate import CubicSpline

    stop = min(float(time[-1]) for time, _ in runs)
    step = 1.0 / (carrier * points)
    grid = np.arange(0.0, stop, step)
    # a cubic spline: a straight line between 40 points a period would lose 0.3 % of the amplitude
    first, second, quiet = (CubicSpline(*_increasing(*run))(grid) for run in runs)
    envelope = ((first - quiet) - 1j * (second - quiet)) * np.exp(-2j * np.pi * carrier * grid)
    half = points // 2
    smooth = _moving_average(_moving_average(envelope, half), half)
    stride = max(1, points // 4)
    return grid[2 * half : -2 * half][::stride], smooth[::stride]


def _moving_average(value: npt.NDArray[np.complex128], half: int) -> npt.NDArray[np.complex128]:
    """Return the mean over 2 half steps around each sample, by the trapezoidal rule; shorter by half at each end."""
    sums = np.concatenate([[0.0], np.cumsum(value)])
    inside = sums[2 * half + 1 :] - sums[: -2 * half - 1]
    return np.asarray((inside - 0.5 * (value[: -2 * half] + value[2 * half :])) / (2 * half))


def _increasing(time: Array, value: Array) -> tuple[Array, Array]:
    """Drop samples that do not advance in time; ngspice repeats an instant at a source's corner."""
    advancing = np.concatenate([[True], np.diff(time) > 0.0])
    return time[advancing], value[advancing]
