"""When the recorded command switches."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from transim.bench.states import States, state_levels
from transim.bench.trace import Trace
from transim.errors import MeasurementError
from transim.measure.waveform import Waveform
from transim.quantities import format_quantity

__all__ = ["Edge", "command_edges"]

Array = npt.NDArray[np.float64]

#: An edge leads from below 30 % to above 70 % or back; noise around 50 % makes no edges.
_LOW, _HIGH = 0.3, 0.7


@dataclass(frozen=True)
class Edge:
    """An edge of the command.

    Attributes
    ----------
    rising : bool
        Its direction.
    instant : float
        Its 50 % point [s].
    length : float
        10 to 90 %, over 0.8 [s]: 0 to 100 % of a straight edge.
    """

    rising: bool
    instant: float
    length: float


def command_edges(trace: Trace, smooth: Array, sigma: Array) -> tuple[Edge, ...]:
    """Find the edges of a command.

    Parameters
    ----------
    trace : Trace
        Its cells.
    smooth, sigma : ndarray, shape (n,)
        Smooth values of the cells and their standard deviations [V].

    Returns
    -------
    tuple of Edge
        In time, at least one.

    Raises
    ------
    MeasurementError
        If it does not switch.
    """
    span = np.gradient(trace.time)
    try:
        states: States = state_levels(smooth, span, sigma)
    except MeasurementError:
        level = format_quantity(float(np.median(smooth)), "V")
        raise MeasurementError(f"the command does not switch: it stays near {level}") from None
    share = Waveform(trace.time, (smooth - states.low) / (states.high - states.low), "1")
    side = np.where(share.value > _HIGH, 1, np.where(share.value < _LOW, -1, 0))
    known = np.flatnonzero(side)
    turns = np.flatnonzero(np.diff(side[known]))
    if not turns.size:
        raise MeasurementError("the command does not switch between its two levels")
    # the last cell on one side and the first on the other
    return tuple(_edge(share, int(known[k]), int(known[k + 1])) for k in turns)


def _edge(share: Waveform, last: int, first: int) -> Edge:
    rising = bool(share.value[first] > share.value[last])
    direction = "rising" if rising else "falling"
    near = Waveform(share.time[last : first + 1], share.value[last : first + 1], "1")
    instants = near.crossings(0.5, direction)  # type: ignore[arg-type]
    middle = float(instants.mean()) if instants.size else float(near.time.mean())
    ends = []
    for level in (0.1, 0.9) if rising else (0.9, 0.1):
        passed = share.crossings(level, direction)  # type: ignore[arg-type]
        ends.append(float(passed[np.argmin(np.abs(passed - middle))]) if passed.size else middle)
    return Edge(rising, middle, max(0.0, ends[1] - ends[0]) / 0.8)
