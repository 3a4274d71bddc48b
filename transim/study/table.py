"""The points of a study as labelled arrays, in memory and on disk."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import numpy.typing as npt

from transim.measure.metrics import METRICS
from transim.study.point import CaseFigures, Point
from transim.study.score import smallest_margin
from transim.study.store import write_whole

__all__ = ["CaseLabel", "Table", "collect"]

Array = npt.NDArray[np.float64]
Truth = npt.NDArray[np.bool_]


@dataclass(frozen=True)
class CaseLabel:
    """What a column of figures belongs to; NaN where the parameter of the study itself says it.

    Attributes
    ----------
    driver : str
        Its name.
    temperature, carrier, level : float
        [degC], [Hz], [dBm].
    throw : str
        Name of the throw; empty where the path has a single way.
    """

    driver: str
    temperature: float
    carrier: float
    level: float
    throw: str = ""


@dataclass(frozen=True)
class Table:
    """n points with p parameters and c cases each.

    Attributes
    ----------
    places : tuple of str
        Place of each point in the study.
    parameters, units : tuple of str
        Dotted names, and their units.
    values : ndarray, shape (n, p)
        Values of the parameters.
    cases : tuple of CaseLabel
        Drivers, temperatures, carriers and levels.
    figures : mapping of str to ndarray, shape (n, c)
        Each metric in its unit; NaN where it is undefined or the point failed.
    case_good : ndarray of bool, shape (n, c)
        Whether every limit and rating is met in a case.
    case_margin : ndarray, shape (n, c)
        Smallest normalised margin of a case; NaN where one is undefined.
    good, failed : ndarray of bool, shape (n,)
        Whether it is met in all cases; whether the point could not be simulated.
    margin : ndarray, shape (n,)
        Smallest normalised margin; NaN where one is undefined.
    reasons : tuple of (str, str)
        Place and reason of each point that failed.
    """

    places: tuple[str, ...]
    parameters: tuple[str, ...]
    units: tuple[str, ...]
    values: Array
    cases: tuple[CaseLabel, ...]
    figures: Mapping[str, Array]
    case_good: Truth
    case_margin: Array
    good: Truth
    failed: Truth
    margin: Array
    reasons: tuple[tuple[str, str], ...]

    def write_arrays(
        self, path: Path, shape: Sequence[int] | None = None, axes: Mapping[str, Array] | None = None
    ) -> None:
        """Write the arrays to a compressed npz file.

        Parameters
        ----------
        path : Path
            The file; replaced whole if it exists.
        shape : sequence of int or None
            Of the points, where they fill a grid; the arrays then have these axes in place of n.
        axes : mapping or None
            Values along these axes.
        """
        shape = (len(self.places),) if shape is None else tuple(shape)
        count = len(self.cases)
        content: dict[str, npt.NDArray[np.generic]] = {
            f"metric.{name}": values.reshape(*shape, count) for name, values in self.figures.items()
        }
        content |= {
            "place": np.array(self.places).reshape(shape),
            "parameter": np.array(self.parameters),
            "parameter_unit": np.array(self.units),
            "value": self.values.reshape(*shape, len(self.parameters)),
            "metric_unit": np.array([f"{name} {METRICS[name].unit}" for name in self.figures]),
            "case.driver": np.array([case.driver for case in self.cases], dtype=np.str_),
            "case.throw": np.array([case.throw for case in self.cases], dtype=np.str_),
            "case.temperature": np.array([case.temperature for case in self.cases]),
            "case.carrier": np.array([case.carrier for case in self.cases]),
            "case.level": np.array([case.level for case in self.cases]),
            "case_good": self.case_good.reshape(*shape, count),
            "case_margin": self.case_margin.reshape(*shape, count),
            "good": self.good.reshape(shape),
            "failed": self.failed.reshape(shape),
            "margin": self.margin.reshape(shape),
        }
        content |= {f"axis.{name}": values for name, values in (axes or {}).items()}
        temporary = path.with_name(f".{path.stem}.new.npz")
        with temporary.open("wb") as stream:
            np.savez_compressed(stream, **content)  # type: ignore[arg-type]
        temporary.replace(path)

    def write_csv(self, path: Path) -> None:
        """Write one row a point and case, in SI units.

        Parameters
        ----------
        path : Path
            The file; replaced whole if it exists.
        """
        stream = io.StringIO()
        writer = csv.writer(stream, lineterminator="\n")
        head = [f"{name} [{unit}]" for name, unit in zip(self.parameters, self.units, strict=True)]
        metrics = [f"{name} [{METRICS[name].unit}]" for name in self.figures]
        labels = ["driver", "throw", "temperature [degC]", "carrier [Hz]", "level [dBm]"]
        writer.writerow(
            ["place", *head, "failed", "all limits met", "smallest margin", *labels, "limits met", *metrics]
        )
        for n, place in enumerate(self.places):
            start = [
                place,
                *map(_number, self.values[n]),
                _word(self.failed[n]),
                _word(self.good[n]),
                _number(self.margin[n]),
            ]
            if self.failed[n]:
                writer.writerow(start)
                continue
            for c, case in enumerate(self.cases):
                label = [case.driver, case.throw, *map(_number, (case.temperature, case.carrier, case.level))]
                figures = [_number(values[n, c]) for values in self.figures.values()]
                writer.writerow([*start, *label, _word(self.case_good[n, c]), *figures])
        write_whole(path, stream.getvalue())


def collect(
    points: Iterable[tuple[str, Point]], places: Sequence[str], parameters: Sequence[str], units: Sequence[str]
) -> Table:
    """Put finished points into arrays.

    Parameters
    ----------
    points : iterable of (str, Point)
        In any order; those at other places are left out.
    places : sequence of str
        The wanted ones, in their order; each must be finished.
    parameters, units : sequence of str
        Dotted names of the values, and their units.

    Returns
    -------
    Table
    """
    row = {place: n for n, place in enumerate(places)}
    count = len(places)
    values = np.full((count, len(parameters)), np.nan)
    good, failed = np.zeros(count, dtype=bool), np.zeros(count, dtype=bool)
    margin = np.full(count, np.nan)
    labels: tuple[CaseLabel, ...] = ()
    reasons = []
    figures: dict[str, Array] = {}
    case_good = np.zeros((count, 0), dtype=bool)
    case_margin = np.full((count, 0), np.nan)
    for place, point in points:
        if place not in row:
            continue
        n = row[place]
        values[n], good[n], failed[n] = point.values, point.good, point.reason is not None
        smallest = smallest_margin(point)
        margin[n] = np.nan if smallest is None else smallest
        if point.reason is not None:
            reasons.append((place, point.reason))
            continue
        if not figures:
            labels = tuple(_label(case, parameters) for case in point.cases)
            figures = {name: np.full((count, len(labels)), np.nan) for name in METRICS}
            case_good = np.zeros((count, len(labels)), dtype=bool)
            case_margin = np.full((count, len(labels)), np.nan)
        for c, case in enumerate(point.cases):
            case_good[n, c] = case.good
            own = smallest_margin(Point(point.values, (case,)))
            case_margin[n, c] = np.nan if own is None else own
            for name, value in case.figures.items():
                figures[name][n, c] = np.nan if value is None else value
    return Table(
        tuple(places),
        tuple(parameters),
        tuple(units),
        values,
        labels,
        figures,
        case_good,
        case_margin,
        good,
        failed,
        margin,
        tuple(sorted(reasons, key=lambda reason: row[reason[0]])),
    )


def _label(case: CaseFigures, parameters: Sequence[str]) -> CaseLabel:
    varied = {
        "temperature": "environment.temperature",
        "carrier": "carrier.frequency",
        "level": "carrier.level",
    }
    found = {key: float("nan") if name in parameters else getattr(case, key) for key, name in varied.items()}
    return CaseLabel(case.driver, **found, throw=case.throw)


def _number(value: float) -> str:
    return "" if np.isnan(value) else repr(float(value))


def _word(truth: object) -> str:
    return "yes" if truth else "no"
