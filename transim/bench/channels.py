"""From the columns of a file to traces on one even time axis."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from transim.bench.records import Table
from transim.bench.setup import Channels
from transim.quantities import format_quantity

__all__ = ["Columns", "read_channels"]

Array = npt.NDArray[np.float64]

#: Most samples that an uneven time axis is put on.
_LARGEST = 400_000
_LEAST = 32


@dataclass(frozen=True)
class Columns:
    """Which column is what, by name or by number from 1.

    Attributes
    ----------
    command : str
        The logic command.
    rf : str or None
        The RF or its detector.
    leakage : mapping of str to str
        Column by RF port.
    time : str or None
        Time; None: the column that is called so or is in seconds.
    interval : float or None
        Time between two rows where there is no column of time [s].
    """

    command: str
    rf: str | None = None
    leakage: Mapping[str, str] = field(default_factory=dict)
    time: str | None = None
    interval: float | None = None


def read_channels(table: Table, columns: Columns) -> Channels:
    """Read the traces of a record.

    Parameters
    ----------
    table : Table
        The file.
    columns : Columns
        Which column is what.

    Returns
    -------
    Channels
        On an even time axis: a column of time whose rounding alone makes it uneven is evened out, any other uneven
        one is interpolated.

    Raises
    ------
    RecordError
        If a column is missing, has another unit than it needs, a cell is no number, or time does not increase.
    """
    clock = _clock(table, columns)
    wanted = {"command": table.index(columns.command, "--command")}
    if columns.rf is not None:
        wanted["rf"] = table.index(columns.rf, "--rf")
    for port, name in columns.leakage.items():
        wanted[f"leakage {port}"] = table.index(name, "--leakage")
    for purpose, index in wanted.items():
        _check_unit(table, index, purpose)
    indices = list(wanted.values())
    data = table.columns([*indices, clock] if isinstance(clock, int) else indices)
    if data.shape[1] < _LEAST:
        raise table.refuse(f"{data.shape[1]} rows of numbers; a record needs {_LEAST} or more")
    traces = dict(zip(wanted, data, strict=False))
    if isinstance(clock, int):
        time, traces = _even(table, data[-1], traces, clock)
    else:
        time = np.asarray(np.arange(data.shape[1]) * clock, dtype=np.float64)
    leakage = {name.removeprefix("leakage "): trace for name, trace in traces.items() if name.startswith("leakage ")}
    return Channels(time, traces["command"], traces.get("rf"), leakage)


def _clock(table: Table, columns: Columns) -> int | float:
    """Return the index of the time column, or the sample interval."""
    if columns.interval is not None:
        return columns.interval
    if columns.time is not None:
        index = table.index(columns.time, "--time")
        if table.headings[index].unit not in (None, "s"):
            raise table.refuse(
                f"--time: column {table.names[index]} is in {table.headings[index].unit}, not in s", header=True
            )
        return index
    named = [k for k, heading in enumerate(table.headings) if heading.name.casefold() in ("time", "t", "time base")]
    timed = [k for k, heading in enumerate(table.headings) if heading.unit == "s"]
    for found in (named, timed):
        if len(found) == 1:
            return found[0]
    interval = table.header_interval()
    if interval is not None and interval > 0.0:
        return interval
    raise table.refuse(
        f"no column of time: name it with --time, or give the time between two rows with --interval; the columns are "
        f"{', '.join(table.names)}",
        header=True,
    )


def _check_unit(table: Table, index: int, purpose: str) -> None:
    unit = table.headings[index].unit
    fitting = (None, "V", "dB", "dBm") if purpose == "rf" else (None, "V")
    if unit not in fitting:
        raise table.refuse(
            f"--{purpose.split()[0]}: column {table.names[index]} is in {unit}, and a voltage is wanted", header=True
        )


def _even(table: Table, time: Array, traces: dict[str, Array], index: int) -> tuple[Array, dict[str, Array]]:
    count = time.size
    span = float(time[-1] - time[0])
    back = np.flatnonzero(np.diff(time) < 0.0)
    if back.size or span <= 0.0:
        at = format_quantity(float(time[back[0]]) if back.size else float(time[0]), "s")
        line = _line_of_row(table, int(back[0]) + 1 if back.size else 1)
        raise table.refuse(f"column {table.names[index]}: time does not increase after {at}", line=line)
    step = span / (count - 1)
    even = time[0] + step * np.arange(count)
    if np.abs(time - even).max() <= max(0.02 * step, _rounding(time, step)):
        return even, traces
    forward = np.concatenate([[True], np.diff(time) > 0.0])
    time = time[forward]
    fine = int(min(_LARGEST, max(count - 1, span / float(np.quantile(np.diff(time), 0.05))))) + 1
    even = np.linspace(time[0], time[-1], fine)
    return even, {name: np.interp(even, time, trace[forward]) for name, trace in traces.items()}


def _rounding(time: Array, step: float) -> float:
    """Return how far printed instants may lie from an even axis because they are rounded."""
    distances = np.diff(time)
    apart = np.diff(np.sort(distances))
    apart = apart[apart > 1e-3 * distances.max()]
    resolution = float(apart.min()) if apart.size else 0.0
    # rounding makes neighbouring distances of two sizes; where there are more, the axis is truly uneven
    return resolution if float(np.ptp(distances)) < 1.5 * resolution < 15.0 * step else 0.0


def _line_of_row(table: Table, row: int) -> int:
    seen = -1
    for number, line in enumerate(table.lines[table.first :], table.first + 1):
        seen += bool(line.strip(" \t;,\r"))
        if seen == row:
            return number
    return table.first + 1
