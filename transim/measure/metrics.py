"""The register of metrics, and their evaluation on a record."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

from transim.errors import MeasurementError
from transim.measure.record import Record

__all__ = ["METRICS", "Figure", "Metric", "extract", "metric"]

Measurement = Callable[[Record], float]


@dataclass(frozen=True)
class Metric:
    """A named figure and how it is taken from a record.

    Parameters
    ----------
    name : str
        Key of the metric in limits and results.
    unit : str
        Unit of its value.
    title : str
        What stands in a table.
    function : callable
        Takes a `Record`, returns the value, raises MeasurementError where there is none.
    analysis : str or None
        The one analysis, ``envelope`` or ``carrier``, that can know it; ``request``: a study that has to be asked
        for; ``throws``: any, of a path with several; None: any.
    """

    name: str
    unit: str
    title: str
    function: Measurement
    analysis: str | None = None

    def serves(self, analysis: str, *, throws: bool = False) -> bool:
        """Tell whether an analysis can know this metric.

        Parameters
        ----------
        analysis : str
            ``envelope`` or ``carrier``.
        throws : bool
            Whether the path has several throws.
        """
        return self.analysis in (None, analysis) or (throws and self.analysis == "throws")


@dataclass(frozen=True)
class Figure:
    """The value of a metric, or the reason why it has none.

    Parameters
    ----------
    value : float or None
        The value [`unit`]; None if it does not exist in the record.
    unit : str
        Its unit.
    note : str or None
        The reason, one line, if there is no value.
    uncertainty : float or None
        Half width of the interval in which the value is known numerically [`unit`], infinite where finer settings
        give no value; None where it was not asked for.
    """

    value: float | None
    unit: str
    note: str | None = None
    uncertainty: float | None = None


_metrics: dict[str, Metric] = {}

#: Every metric by name, in the order in which results are listed.
METRICS: Mapping[str, Metric] = MappingProxyType(_metrics)


def metric(name: str, *, unit: str, title: str, analysis: str | None = None) -> Callable[[Measurement], Measurement]:
    """Enter a function in the register.

    Parameters
    ----------
    name : str
        Key of the metric.
    unit : str
        Unit of its value.
    title : str
        What stands in a table.
    analysis : str or None
        As `Metric` has it.

    Returns
    -------
    callable
        Decorator that gives the function back unchanged.

    Raises
    ------
    ValueError
        If the name is taken.
    """

    def enter(function: Measurement) -> Measurement:
        if name in _metrics:
            raise ValueError(f"metric {name} is registered twice")
        _metrics[name] = Metric(name, unit, title, function, analysis)
        return function

    return enter


def extract(record: Record) -> dict[str, Figure]:
    """Evaluate every metric on a record.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    dict of str to Figure
        One figure for each entry of `METRICS`, in its order; what does not exist has its reason.
    """
    return {name: _figure(entry, record) for name, entry in METRICS.items()}


def _figure(entry: Metric, record: Record) -> Figure:
    try:
        value = float(entry.function(record))
    except MeasurementError as reason:
        return Figure(None, entry.unit, reason.message)
    if not math.isfinite(value):
        return Figure(None, entry.unit, "the waveform gives no finite number")
    return Figure(value + 0.0, entry.unit)  # no minus zero in results
