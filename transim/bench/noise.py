"""The noise of a record, its quantisation, and how far it is the same from sample to sample."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

__all__ = ["Noise", "estimate_noise"]

Array = npt.NDArray[np.float64]

#: Smallest noise that is reckoned with, as a share of the range: what is below is rounding.
_FLOOR = 1e-6
#: Standard deviation of Gaussian noise over the median of its magnitude.
_NORMAL = 1.4826
_BLOCKS = 32


@dataclass(frozen=True)
class Noise:
    """What is not signal in a trace.

    Attributes
    ----------
    sigma : ndarray, shape (n,)
        Standard deviation at each sample, quantisation included.
    quantum : float
        Step of the converter; 0 where none shows.
    dithered : bool
        Whether the noise is large enough against the step for averages to go below it.
    correlation : int
        Samples after which the noise is new.
    """

    sigma: Array
    quantum: float
    dithered: bool
    correlation: int


def estimate_noise(rows: Array) -> Noise:
    """Estimate the noise of an evenly sampled trace.

    Parameters
    ----------
    rows : ndarray, shape (c, n)
        Real components.

    Returns
    -------
    Noise
        From second differences, which a smooth signal hardly has: the median of their magnitude over sqrt(6), over
        stretches of the trace, so that noise may differ between the two states.
    """
    count = rows.shape[1]
    span = float(np.ptp(rows)) or 1.0
    quantum = _quantum(rows)
    differences = np.abs(np.diff(rows, n=2, axis=1)) if count > 2 else np.zeros((rows.shape[0], 1))
    stretch = max(128, count // 64)
    starts = np.arange(0, max(1, differences.shape[1] - stretch // 2), stretch)
    medians = np.array([np.median(differences[:, k : k + stretch]) for k in starts])
    local = medians * _NORMAL / np.sqrt(6.0)
    centres = np.minimum(starts + stretch / 2.0, count)
    dithered = bool(np.median(local) > quantum / 2.0)
    # the treads of a stair are no noise
    correlation = _correlation(rows, float(local.max()), span) if dithered else 1
    sigma = np.interp(np.arange(count), centres, local)
    rough = np.sqrt(sigma**2 + quantum**2 / 12.0)
    least = _FLOOR * span
    return Noise(np.maximum(rough, least), quantum, dithered, correlation)


def _quantum(rows: Array) -> float:
    """Return the smallest step between values, if the values stand on steps."""
    if rows.shape[0] > 1:
        return 0.0
    values = np.unique(rows)
    if values.size < 3 or values.size > min(4096, rows.size / 4):
        return 0.0
    steps = np.diff(values)
    steps = steps[steps > 1e-6 * (values[-1] - values[0])]
    step = float(steps.min())
    share = steps / step
    return step if np.all(np.abs(share - np.round(share)) < 0.1) else 0.0


def _correlation(rows: Array, sigma: float, span: float) -> int:
    """Return the lag at which the noise of the quietest stretches has lost its memory."""
    count = rows.shape[1]
    length = count // _BLOCKS
    if length < 64 or sigma <= 10.0 * _FLOOR * span:
        return 1
    blocks = rows[:, : length * _BLOCKS].reshape(-1, length)
    place = np.linspace(-1.0, 1.0, length)
    basis = np.stack([np.ones(length), place, place**2 - np.mean(place**2)])
    basis /= np.linalg.norm(basis, axis=1, keepdims=True)
    rest = blocks - (blocks @ basis.T) @ basis
    power = (rest**2).mean(axis=1)
    order = np.argsort(power)[: _BLOCKS // 4]
    # noise is everywhere; what leaves stretches untouched is the tail of a signal
    if power[order[0]] < (_FLOOR * span) ** 2:
        return 1
    quiet: Array = rest[order]
    energy = float((quiet**2).sum())
    for lag in range(1, min(33, count // 512 + 1)):
        if float((quiet[:, lag:] * quiet[:, :-lag]).sum()) < 0.2 * energy:
            return int(lag)
    return int(max(1, min(32, count // 512)))
