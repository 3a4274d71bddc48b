"""Where the time of an edge goes: the switching time split at successive instants from the command to the RF."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np

from transim.errors import MeasurementError
from transim.measure.pulse import fall_time, off_time, on_delay, on_time
from transim.measure.record import Record
from transim.measure.waveform import Waveform

__all__ = ["PARTS", "Budget", "time_budget"]

#: Names of the parts in their order; parts that cannot be told apart are joined by " and ".
PARTS = ("driver", "junction current", "charge transport", "RF transition")
_ENDS = ("driver output", "junction current", "first change of the RF")


@dataclass(frozen=True)
class Budget:
    """A switching time and the parts that it is made of.

    Parameters
    ----------
    metric : {"on_time", "off_time"}
        The time that is split.
    parts : tuple of (str, float)
        Name and duration [s] of each part, in the order of time; none is negative unless the metric is. They are
        differences of successive instants, so that they add up to `total`.
    total : float
        The metric [s].
    end : float
        Instant at which the last part ends, on the axis of the record [s].
    notes : tuple of str
        Which parts were joined, and why.
    """

    metric: Literal["on_time", "off_time"]
    parts: tuple[tuple[str, float], ...]
    total: float
    end: float
    notes: tuple[str, ...] = ()

    @property
    def fixed(self) -> float:
        """Time until the junction current has turned, which more current does not shorten [s]."""
        return math.fsum(seconds for name, seconds in self.parts if name.split(" and ")[0] in PARTS[:2])

    def share(self, name: str) -> float:
        """Return a part as a share of the total.

        Parameters
        ----------
        name : str
            A part of this budget.
        """
        return dict(self.parts)[name] / self.total


def time_budget(record: Record, edge: Literal["on", "off"]) -> Budget:
    """Split `on_time` or `off_time` into its parts.

    Parameters
    ----------
    record : Record
        The cycle.
    edge : {"on", "off"}
        Which time.

    Returns
    -------
    Budget

    Raises
    ------
    MeasurementError
        If the time itself is undefined.

    Notes
    -----
    The instants between the parts:

    - driver output: voltage at the driver's output half way for the first time from its value before the edge to
      the value farthest from that which it takes until the RF begins to move;
    - junction current: half way for the last time from its value before the edge to that at the instant at which
      the RF begins to move, of the junction whose terminal current changes most between these two;
    - first change of the RF: the first rise through 10 % (on), the last fall through 90 % before 10 % (off);
    - the end: the 90 % (on) or 10 % (off) instant that the metric counts to.

    The RF begins to move at the third instant. An instant that is not known, or comes before its predecessor,
    is left out, and the two parts beside it become one, which `Budget.notes` says.
    """
    timing = record.timing
    begin = (timing.on_window() if edge == "on" else timing.off_window())[0]
    zero = timing.on_edge if edge == "on" else timing.off_edge
    total = on_time(record) if edge == "on" else off_time(record)
    moves = _first_change(record, edge, total)
    until = zero + (total if isinstance(moves, str) else min(moves, total))
    found: list[float | str] = [
        _output_half(record, begin, until),
        _current_half(record, begin, until),
        moves if isinstance(moves, str) else zero + moves,
    ]
    later = zero + total
    # from the end backwards: what is nearer to the RF decides
    kept: dict[int, float] = {}
    notes: list[str] = []
    for place in (2, 1, 0):
        instant = found[place]
        if isinstance(instant, str):
            notes.append(f"{_ENDS[place]}: {instant}")
        elif zero <= instant <= later:
            kept[place] = later = instant
        else:
            side = "before the command's 50 % point" if instant < zero else "after what follows it"
            notes.append(f"{_ENDS[place]}: comes {side}")
    return _joined("on_time" if edge == "on" else "off_time", kept, zero, total, tuple(reversed(notes)))


def _joined(
    metric: Literal["on_time", "off_time"],
    kept: Mapping[int, float],
    zero: float,
    total: float,
    notes: tuple[str, ...],
) -> Budget:
    """Put the parts between the instants that are kept."""
    parts: list[tuple[str, float]] = []
    names: list[str] = []
    last = 0.0
    for place, name in enumerate(PARTS):
        names.append(name)
        instant = total if place == len(PARTS) - 1 else kept[place] - zero if place in kept else None
        if instant is not None:
            parts.append((" and ".join(names), instant - last))
            names, last = [], instant
    return Budget(metric, tuple(parts), total, zero + total, notes)


def _first_change(record: Record, edge: str, total: float) -> float | str:
    """Return when the RF leaves its old level, from the command's 50 % point [s], or why that is not known."""
    try:
        return on_delay(record) if edge == "on" else total - fall_time(record)
    except MeasurementError as reason:
        return reason.message


def _output_half(record: Record, begin: float, until: float) -> float | str:
    """Return when the driver's output is half way to where it goes farthest, or why that is not known."""
    if record.driver_voltage is None:
        return "not in this record"
    if until <= begin:
        return "the RF moves before the command does"
    cut = record.driver_voltage.between(begin, until)
    away = np.real(cut.value - cut.value[0])
    farthest = float(away[int(np.argmax(np.abs(away)))])
    if farthest == 0.0:
        return "it does not change before the RF does"
    return float(Waveform(cut.time, away / farthest, "1").crossings(0.5, "rising")[0])


def _current_half(record: Record, begin: float, until: float) -> float | str:
    """Return when the current of the leading junction is half way to where it is when the RF moves, or why not."""
    if not record.junction_current:
        return "not in this record"
    if until <= begin:
        return "the RF moves before the command does"
    cuts = [wave.between(begin, until) for wave in record.junction_current.values()]
    cut = max(cuts, key=lambda one: abs(one.value[-1] - one.value[0]))
    change = float(np.real(cut.value[-1] - cut.value[0]))
    if change == 0.0:
        return "it does not change before the RF does"
    return float(Waveform(cut.time, np.real(cut.value - cut.value[0]) / change, "1").crossings(0.5, "rising")[-1])
