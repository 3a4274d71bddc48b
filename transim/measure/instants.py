"""The instants of waveforms: checked once, shared by all waveforms of a run, and cut once an interval."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any
from weakref import WeakValueDictionary

import numpy as np
from numpy.typing import NDArray

from transim.errors import MeasurementError
from transim.quantities import format_quantity

__all__ = ["Cut", "Instants"]

_known: WeakValueDictionary[int, Instants] = WeakValueDictionary()


class Instants:
    """Strictly increasing times.

    Parameters
    ----------
    time : ndarray, shape (n,)
        Finite, at least two [s]; taken over, and read-only from then on.

    Raises
    ------
    MeasurementError
        If a time is not finite or does not increase.
    """

    def __init__(self, time: NDArray[np.float64]) -> None:
        if not np.isfinite(time).all():
            raise MeasurementError("a time of the waveform is not a finite number")
        back = np.flatnonzero(np.diff(time) <= 0.0)
        if back.size:
            raise MeasurementError(f"time does not increase after {format_quantity(time[back[0]], 's')}")
        time.setflags(write=False)
        self.time = time
        self._cuts: dict[tuple[float, float], Cut] = {}
        _known[id(time)] = self

    @staticmethod
    def known(time: Any) -> Instants | None:
        """Return the instants whose own array this is, None of any other array."""
        found = _known.get(id(time))
        return found if found is not None and found.time is time else None

    @cached_property
    def steps(self) -> NDArray[np.float64]:
        """Differences between neighbours, shape (n - 1,) [s]."""
        return np.diff(self.time)

    def between(self, start: float, stop: float) -> Cut:
        """Return the instants of an interval, its ends included.

        Parameters
        ----------
        start, stop : float
            The interval, where it leaves the instants it ends with them [s].

        Returns
        -------
        Cut

        Raises
        ------
        MeasurementError
            If nothing of the interval is left.
        """
        cut = self._cuts.get((start, stop))
        if cut is None:
            begin, end = max(start, float(self.time[0])), min(stop, float(self.time[-1]))
            first = int(np.searchsorted(self.time, begin, side="right"))
            inner = self.time[first : max(first, int(np.searchsorted(self.time, end, side="left")))]
            cut = Cut(Instants(np.concatenate(([begin], inner, [end]))), first)
            self._cuts[start, stop] = cut
        return cut


@dataclass(frozen=True, eq=False)
class Cut:
    """Part of some instants: the ends of an interval and what lies between, whose first one is at place `first`."""

    instants: Instants
    first: int
