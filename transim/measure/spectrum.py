"""Fourier integral of samples joined by straight lines."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

__all__ = ["fourier_integral"]

Real = NDArray[np.float64]


def fourier_integral(time: Real, value: Real | NDArray[np.complex128], frequency: float) -> complex:
    """Return the Fourier integral of straight lines at one frequency, exactly.

    Parameters
    ----------
    time : ndarray, shape (n,)
        Instants, strictly increasing [s].
    value : ndarray, shape (n,)
        Finite samples, joined by straight lines; zero before the first and after the last.
    frequency : float
        The frequency f [Hz].

    Returns
    -------
    complex
        Integral of value(t) exp(-2j pi f t) dt [unit of `value` times s].

    Notes
    -----
    A line from a to b over dt around the instant c gives, with x = pi f dt and the spherical Bessel
    functions j0 and j1, dt exp(-2j pi f c) [j0(x) (a + b)/2 - 1j j1(x) (b - a)/2]: the integrals of 1 and
    of t against the exponential. No difference of large terms remains for small f dt.
    """
    step = np.diff(time)
    centre = (time[:-1] + time[1:]) / 2.0 - time[0]
    even = (value[:-1] + value[1:]) / 2.0 * np.sinc(frequency * step)
    odd = (value[1:] - value[:-1]) / 2.0 * _spherical_j1(math.pi * frequency * step)
    total = np.sum(step * (even - 1j * odd) * np.exp(-2j * math.pi * frequency * centre))
    return complex(total * np.exp(-2j * math.pi * frequency * time[0]))


def _spherical_j1(x: Real) -> Real:
    """Return (sin x - x cos x)/x^2, by its series where the difference would cancel."""
    square = x * x
    small = np.abs(x) < 0.3
    away = np.where(small, 1.0, x)
    tail = square * (1.0 / 280.0 + square * (-1.0 / 15120.0 + square / 1330560.0))
    near = x / 3.0 * (1.0 + square * (-1.0 / 10.0 + tail))
    return np.where(small, near, (np.sin(away) - away * np.cos(away)) / (away * away))
