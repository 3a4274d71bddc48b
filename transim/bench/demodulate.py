"""Envelope of a recorded carrier: its complex amplitude period by period."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from transim.errors import MeasurementError
from transim.quantities import format_quantity

__all__ = ["demodulate", "find_carrier"]

Array = npt.NDArray[np.float64]
Complex = npt.NDArray[np.complex128]

#: Samples that a block must have for three unknowns.
_LEAST = 8


def demodulate(time: Array, value: Array, carrier: float) -> tuple[Array, Complex, float]:
    """Return the complex amplitude of a carrier.

    Parameters
    ----------
    time : ndarray, shape (n,)
        Instants, increasing, even [s].
    value : ndarray, shape (n,)
        Samples of the carrier.
    carrier : float
        Its frequency f [Hz].

    Returns
    -------
    time : ndarray, shape (m,)
        Middle of each block [s]: one period, or as many as hold eight samples.
    amplitude : ndarray of complex, shape (m,)
        a in Re(a exp(2j pi f t)) by least squares over the block, beside a constant for what is not RF.
    noise : float
        Standard deviation of the samples around it.

    Raises
    ------
    MeasurementError
        If the record is too coarse or too short for the carrier.
    """
    step = float(np.median(np.diff(time)))
    if carrier * step >= 0.5:
        raise MeasurementError(
            f"a carrier of {format_quantity(carrier, 'Hz')} needs more than two samples a period; the record has one "
            f"each {format_quantity(step, 's')}"
        )
    periods = max(1, math.ceil(_LEAST * carrier * step - 1e-9))
    block = np.floor((time - time[0]) * carrier / periods + 1e-9).astype(np.int64)
    whole = block < block[-1]  # the last block may be cut short
    if block[-1] < 4:
        raise MeasurementError(f"the record holds fewer than four periods of {format_quantity(carrier, 'Hz')}")
    time, value, block = time[whole], value[whole], block[whole]
    first = np.flatnonzero(np.diff(block, prepend=-1))
    angle = 2.0 * np.pi * carrier * time
    basis = np.stack([np.cos(angle), np.sin(angle), np.ones_like(angle)])
    normal = np.array([[np.add.reduceat(a * b, first) for b in basis] for a in basis]).transpose(2, 0, 1)
    right = np.stack([np.add.reduceat(a * value, first) for a in basis], axis=-1)[..., None]
    solved = np.linalg.solve(normal, right)[..., 0]
    count = np.diff(np.append(first, time.size))
    rest = value - (basis * np.repeat(solved.T, count, axis=1)).sum(axis=0)
    free = np.maximum(count - 3, 1)
    noise = float(np.sqrt(np.median(np.add.reduceat(rest * rest, first) / free)))
    return np.add.reduceat(time, first) / count, solved[:, 0] - 1j * solved[:, 1], noise


def find_carrier(time: Array, value: Array) -> float:
    """Return the frequency of the strongest line of a record.

    Parameters
    ----------
    time : ndarray, shape (n,)
        Instants, increasing, even [s].
    value : ndarray, shape (n,)
        Samples of a carrier that is switched on for a part of the record.

    Returns
    -------
    float
        The frequency [Hz]: peak of the windowed spectrum, refined by the drift of the phase where the RF is on.

    Raises
    ------
    MeasurementError
        If there is no line.
    """
    step = float(np.median(np.diff(time)))
    window = np.hanning(value.size)
    spectrum = np.abs(np.fft.rfft((value - value.mean()) * window))
    lowest = 4
    peak = int(np.argmax(spectrum[lowest:])) + lowest
    if peak + 1 >= spectrum.size or spectrum[peak] < 8.0 * np.median(spectrum):
        raise MeasurementError("no carrier stands out of the RF trace; state its frequency with --carrier")
    carrier = peak / (value.size * step)
    for _ in range(3):
        at, amplitude, _ = demodulate(time, value, carrier)
        size = np.abs(amplitude)
        on = size > 0.5 * np.quantile(size, 0.95)
        phase = np.unwrap(np.angle(amplitude[on]))
        slope = np.polyfit(at[on] - at[on].mean(), phase, 1, w=size[on])[0] if on.sum() > 3 else 0.0
        carrier += float(slope) / (2.0 * np.pi)
    return carrier
