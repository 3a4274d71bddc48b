"""A noisy trace, gathered into cells as fine as its noise lets one see, and smoothed over them.

Where a parabola holds over a long piece, its samples are averaged in cells of 1/32 of that piece; at a sharp corner
the cells are single samples. The smooth trace at a cell is the parabola of weighted least squares over its
neighbourhood of a quarter piece to each side: short enough that its bias is below its noise. Both the cells and the
weights are fixed once, so that the smooth trace is linear in the samples and noise can be sent through it again.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
import numpy.typing as npt

from transim.bench.noise import Noise, estimate_noise
from transim.bench.resolution import piece_lengths

__all__ = ["Smoother", "Trace", "gather"]

Array = npt.NDArray[np.float64]
#: Real or complex.
Samples = npt.NDArray[Any]

#: Cells in a piece, and half the neighbourhood as a share of it.
_CELLS = 32
_SHARE = 0.25
_REACH = 10


@dataclass(frozen=True)
class Trace:
    """A measured quantity in cells.

    Attributes
    ----------
    time : ndarray, shape (n,)
        Mean instant of each cell, increasing [s].
    value : ndarray, shape (n,)
        Mean of its samples, real or complex.
    sigma : ndarray, shape (n,)
        Standard deviation of that mean, of each component of a complex one.
    piece : ndarray, shape (n,)
        Length of the piece around [s].
    noise : Noise
        Of the samples.
    step : float
        Time between two samples [s].
    """

    time: Array
    value: Samples
    sigma: Array
    piece: Array
    noise: Noise
    step: float


def gather(time: Array, value: Samples, quantum: float = 0.0) -> Trace:
    """Gather samples into cells.

    Parameters
    ----------
    time : ndarray, shape (n,)
        Instants, increasing [s].
    value : ndarray, shape (n,)
        Samples, real or complex.
    quantum : float
        Step of the converter where the samples no longer show it: they are amplitudes, and the noise of what they
        were taken from was too small to average it.

    Returns
    -------
    Trace
        The cells.
    """
    rows = _rows(value)
    noise = estimate_noise(rows)
    if quantum > 0.0:
        noise = replace(noise, quantum=quantum, dithered=False, correlation=1)
    if noise.correlation > 1:
        time, value = _blocks(time, noise.correlation), _blocks(value, noise.correlation)
        rows = _rows(value)
        noise = estimate_noise(rows)
    variance = noise.sigma**2
    lengths = piece_lengths(rows, variance)
    cell = np.floor(np.cumsum(1.0 / np.maximum(1.0, lengths / _CELLS)) - 1e-9).astype(np.int64)
    first = np.flatnonzero(np.diff(cell, prepend=cell[0] - 1))
    count = np.diff(np.append(first, time.size))
    step = float(np.median(np.diff(time)))
    return Trace(
        time=np.add.reduceat(time, first) / count,
        value=np.add.reduceat(value, first) / count,
        sigma=np.sqrt(np.add.reduceat(variance, first)) / count,
        piece=np.add.reduceat(lengths, first) / count * step,
        noise=noise,
        step=step,
    )


class Smoother:
    """The weights that make a smooth trace.

    Parameters
    ----------
    trace : Trace
        The cells.
    narrower : float
        What the neighbourhood is divided by.
    """

    def __init__(self, trace: Trace, narrower: float = 1.0) -> None:
        count = trace.time.size
        places = np.arange(count)[:, None] + np.arange(-_REACH, _REACH + 1)
        self._index = np.clip(places, 0, count - 1)
        half = np.maximum(_SHARE * trace.piece / narrower, trace.step / 2.0)[:, None]
        offset = (trace.time[self._index] - trace.time[:, None]) / half
        weight = np.where((places == self._index) & (np.abs(offset) <= 1.0), 1.0, 0.0)
        weight *= np.maximum(1.0 - (offset / 1.05) ** 2, 0.0) / trace.sigma[self._index] ** 2
        weight /= weight.sum(axis=1, keepdims=True)
        few = (weight > 0.0).sum(axis=1) < 4
        sums = [(weight * offset**power).sum(axis=1) for power in range(5)]
        normal = np.stack([np.stack(sums[k : k + 3], axis=-1) for k in range(3)], axis=-2)
        normal[few] = np.eye(3)
        unit = np.zeros((count, 3, 1))
        unit[:, 0] = 1.0
        first = np.linalg.solve(normal, unit)[..., 0]
        self._weight = weight * (first[:, :1] + first[:, 1:2] * offset + first[:, 2:] * offset**2)
        self._weight[few] = 0.0
        self._weight[few, _REACH] = 1.0
        self.sigma = np.sqrt((self._weight**2 * trace.sigma[self._index] ** 2).sum(axis=1))

    def __call__(self, value: Samples) -> Samples:
        """Smooth the values of the cells.

        Parameters
        ----------
        value : ndarray, shape (n,)
            Their values.

        Returns
        -------
        ndarray, shape (n,)
            Smoothed.
        """
        return np.asarray((self._weight * value[self._index]).sum(axis=1))


def _rows(value: Samples) -> Array:
    return np.stack([value.real, value.imag]) if np.iscomplexobj(value) else np.asarray(value, dtype=float)[None]


def _blocks(value: Samples, size: int) -> Samples:
    whole = value.size // size * size
    return np.asarray(value[:whole].reshape(-1, size).mean(axis=1))
