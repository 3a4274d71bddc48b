"""A recorded command: a file of instants and volts, and the pulses that are in it."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import numpy.typing as npt

from transim.errors import DesignError
from transim.quantities import format_quantity

__all__ = ["Command", "read_command"]

Array = npt.NDArray[np.float64]

_LARGEST_FILE = 20_000_000
#: More corners than this make a deck slow.
_MOST = 5000
#: A sample closer than this share of the swing to the straight line between its neighbours is no corner.
_STRAIGHT = 2e-3
#: The record has to begin this close to its low level, as a share of the swing.
_LOW = 0.1
_SEPARATOR = re.compile(r"\s*[,;\t]\s*|\s+")
_UNIT = re.compile(r"[\[(]\s*([^\])]*?)\s*[\])]")


@dataclass(frozen=True)
class Command:
    """A command as recorded, and its complete pulses.

    Parameters
    ----------
    file : str
        Name of the file.
    time, volts : tuple of float
        Corners of the command; straight lines between them [s], [V].
    low, high : float
        Levels: that at the begin, and the median of the judged pulse while it is above the middle [V].
    edge : float
        Longer edge of the judged pulse, its 10 to 90 % time over 0.8 [s].
    pulses : tuple of (float, float)
        Rise and fall of each complete pulse through the middle of its levels [s]; the last is judged.
    next_rise : float or None
        Where the record goes on after the judged pulse: the next rise through the middle [s].
    """

    file: str
    time: tuple[float, ...]
    volts: tuple[float, ...]
    low: float
    high: float
    edge: float
    pulses: tuple[tuple[float, float], ...]
    next_rise: float | None

    @property
    def spacing(self) -> float | None:
        """From the rise of the last pulse but one to that of the judged one [s]; None for a single pulse."""
        return self.pulses[-1][0] - self.pulses[-2][0] if len(self.pulses) > 1 else None


def read_command(file: Path) -> Command:
    """Read a recorded command.

    Parameters
    ----------
    file : Path
        Text with two columns, separated by comma, semicolon, tab or blanks: time in seconds, increasing, and volts,
        both plain numbers. Lines before the first number are headings; a unit in brackets there must be s and V.

    Returns
    -------
    Command

    Raises
    ------
    DesignError
        If the file cannot be read, is no such table, or holds no complete pulse.
    """
    time, volts = _table(file)
    lowest, highest = float(volts.min()), float(volts.max())
    swing, middle = highest - lowest, (lowest + highest) / 2.0
    if swing <= 0.0:
        raise DesignError("the recorded command never changes", found=format_quantity(lowest, "V"))
    if volts[0] > lowest + _LOW * swing:
        raise DesignError(
            "the recorded command must begin while it is low",
            expected=f"about {format_quantity(lowest, 'V')} in the first line",
            found=format_quantity(float(volts[0]), "V"),
        )
    rises, falls = (_crossings(time, sign * (volts - middle)) for sign in (1.0, -1.0))
    pulses = tuple((float(rise), float(fall)) for rise, fall in zip(rises, falls, strict=False))
    if not pulses:
        raise DesignError(
            "the recorded command has no complete pulse",
            expected=f"a rise and then a fall through {format_quantity(middle, 'V')}",
            found=f"{len(rises)} rise and {len(falls)} fall",
        )
    rise, fall = pulses[-1]
    high = float(np.median(np.interp(np.linspace(rise, fall, 1001), time, volts)))
    corners = _corners(time, volts, _STRAIGHT * swing)
    if corners.size > _MOST:
        raise DesignError(
            "the recorded command has too many corners; smooth it, or leave the command's noise out",
            expected=f"at most {_MOST}",
            found=str(corners.size),
        )
    return Command(
        file=file.name,
        time=tuple(time[corners].tolist()),
        volts=tuple(volts[corners].tolist()),
        low=float(volts[0]),
        high=high,
        edge=max(_edge(time, volts - volts[0], high - volts[0], instant) for instant in (rise, fall)),
        pulses=pulses,
        next_rise=float(rises[len(pulses)]) if len(rises) > len(pulses) else None,
    )


def _table(file: Path) -> tuple[Array, Array]:
    """Return the two columns."""
    rows: list[tuple[float, float]] = []
    for number, line in enumerate(_text(file).splitlines(), start=1):
        if not line.strip() or line.lstrip().startswith("#"):
            continue
        cells = _SEPARATOR.split(line.strip())
        try:
            first, second = (float(cell) for cell in cells)
        except ValueError:
            if rows:
                raise DesignError(
                    f"line {number} of the recorded command is no row", expected="time in s and volts", found=line[:60]
                ) from None
            units = [unit for unit in _UNIT.findall(line) if unit not in ("s", "V")]
            if units:
                raise DesignError(
                    f"line {number} of the recorded command names other units",
                    expected="time in s and V, plain numbers",
                    found=", ".join(units),
                ) from None
            continue
        if not (math.isfinite(first) and math.isfinite(second)):
            raise DesignError(f"line {number} of the recorded command is not finite", found=line[:60])
        if rows and first <= rows[-1][0]:
            raise DesignError(
                f"time does not increase in line {number} of the recorded command",
                expected=f"more than {format_quantity(rows[-1][0], 's', 12)}",
                found=format_quantity(first, "s", 12),
            )
        rows.append((first, second))
    if len(rows) < 3:
        raise DesignError(
            "the recorded command is too short", expected="at least 3 rows of time in s and volts",
            found=str(len(rows)),
        )  # fmt: skip
    table = np.array(rows)
    return table[:, 0], table[:, 1]


def _text(file: Path) -> str:
    try:
        if not file.is_file():
            raise DesignError("there is no such file with a recorded command", found=file.name)
        if file.stat().st_size > _LARGEST_FILE:
            raise DesignError("the file of the recorded command is larger than 20 MB", found=file.name)
        return file.read_text(encoding="utf-8-sig")
    except OSError as exc:
        raise DesignError(f"the recorded command cannot be read: {exc.strerror}", found=file.name) from exc
    except UnicodeDecodeError as exc:
        raise DesignError("the recorded command is not UTF-8 text", found=file.name) from exc


def _crossings(time: Array, value: Array) -> Array:
    """Return where a polyline goes from below zero to zero or above, by straight lines."""
    places = np.flatnonzero((value[:-1] < 0.0) & (value[1:] >= 0.0))
    share = value[places] / (value[places] - value[places + 1])
    return np.asarray(time[places] + share * (time[places + 1] - time[places]))


def _edge(time: Array, value: Array, swing: float, instant: float) -> float:
    """Return the length of the edge at an instant, from the levels of 10 and 90 % next to it."""
    share = value / swing
    levels = [np.sort(np.concatenate((_crossings(time, share - level), _crossings(time, level - share))))
              for level in (0.1, 0.9)]  # fmt: skip
    ends = []
    for crossed in levels:
        if not crossed.size:
            raise DesignError("the edges of the recorded command do not go from 10 to 90 % of its levels")
        ends.append(float(crossed[int(np.argmin(np.abs(crossed - instant)))]))
    return abs(ends[1] - ends[0]) / 0.8


def _corners(time: Array, volts: Array, tolerance: float) -> npt.NDArray[np.int64]:
    """Return the samples that a polyline within a tolerance needs: each piece is split at its farthest sample."""
    kept, waiting = {0, time.size - 1}, [(0, time.size - 1)]
    while waiting:
        first, last = waiting.pop()
        if last - first < 2:
            continue
        inner = slice(first + 1, last)
        line = np.interp(time[inner], time[[first, last]], volts[[first, last]])
        distance = np.abs(volts[inner] - line)
        worst = int(np.argmax(distance))
        if distance[worst] > tolerance:
            middle = first + 1 + worst
            kept.add(middle)
            waiting += [(first, middle), (middle, last)]
    return np.array(sorted(kept))
