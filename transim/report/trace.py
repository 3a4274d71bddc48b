"""A named quantity against time, as figures and page draw it."""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

__all__ = ["Trace", "thinned"]

Array = npt.NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Trace:
    """A named quantity of one case against time.

    Attributes
    ----------
    name : str
        What a label says.
    unit : str
        Unit of `value`.
    time : ndarray, shape (n,)
        Instants [s]; zero is the 50 % point of the command's rising edge.
    value : ndarray, shape (n,)
        Real or complex samples.
    """

    name: str
    unit: str
    time: Array
    value: npt.NDArray[np.float64] | npt.NDArray[np.complex128]

    def magnitude(self) -> Trace:
        """Return the magnitude, unit kept.

        Returns
        -------
        Trace
            On the same instants.
        """
        return Trace(self.name, self.unit, self.time, np.abs(self.value))

    def level(self) -> Trace:
        """Return 20 log10 of the magnitude.

        Returns
        -------
        Trace
            In dB; where the magnitude is zero, the smallest number that a float holds.
        """
        size = np.maximum(np.abs(self.value), np.finfo(float).tiny)
        return Trace(self.name, "dB", self.time, 20.0 * np.log10(size))

    def between(self, start: float, stop: float) -> Trace:
        """Cut out an interval; its ends are interpolated.

        Parameters
        ----------
        start, stop : float
            The interval [s].

        Returns
        -------
        Trace
            The part of it that the trace covers.
        """
        start, stop = max(start, float(self.time[0])), min(stop, float(self.time[-1]))
        inside = self.time[(self.time > start) & (self.time < stop)]
        time = np.concatenate(([start], inside, [stop]))
        return Trace(self.name, self.unit, time, np.interp(time, self.time, self.value))


def thinned(trace: Trace, points: int) -> Trace:
    """Leave out samples that the eye does not miss: every stretch keeps its first, lowest and highest one.

    Parameters
    ----------
    trace : Trace
        Real samples.
    points : int
        At most so many are kept, at least 8.

    Returns
    -------
    Trace
        The trace itself where it is short enough.
    """
    count = trace.time.size
    if count <= max(points, 8):
        return trace
    bounds = np.linspace(0, count - 1, max((points - 1) // 3, 2) + 1).astype(int)
    kept = {count - 1}
    for first, last in itertools.pairwise(bounds.tolist()):
        part = trace.value.real[first:last]
        kept |= {first, first + int(np.argmin(part)), first + int(np.argmax(part))}
    index = np.array(sorted(kept))
    return Trace(trace.name, trace.unit, trace.time[index], trace.value[index])
