"""The table `[limits]`: what the metrics may be."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Protocol

from transim.design.faults import Faults
from transim.design.fields import Quantity, shown
from transim.errors import DesignError
from transim.measure.limits import Limit
from transim.quantities import UNITS, format_quantity

__all__ = ["Unitful", "read_limits"]


class Unitful(Protocol):
    """What is asked of a metric here."""

    @property
    def unit(self) -> str:
        """Unit of the metric."""


def read_limits(faults: Faults, raw: object, metrics: Mapping[str, Unitful]) -> tuple[Limit, ...]:
    """Read the limits.

    Parameters
    ----------
    faults : Faults
        Where errors go.
    raw : object
        The table `[limits]`.
    metrics : mapping of str to object with unit
        Metrics that may be limited.

    Returns
    -------
    tuple of Limit
        Those without errors.
    """
    limits = []
    for metric, entry in (faults.table(("limits",), raw) or {}).items():
        path = ("limits", metric)
        if metric not in metrics:
            faults.unknown(path, metrics, "there is no such metric")
            continue
        unit = metrics[metric].unit
        example = UNITS[unit].example if unit == "1" else f'"{UNITS[unit].example}"'
        if not isinstance(entry, dict):
            faults.adopt(
                path,
                DesignError(
                    "a limit has a min, a max or both",
                    expected=f"{metric} = {{ max = {example} }}",
                    found=shown(entry),
                ),
            )
            continue
        before = len(faults.errors)
        ends: dict[str, float | None] = {}
        for key, value in entry.items():
            if key in ("min", "max"):
                ends[key] = faults.value((*path, key), value, Quantity(unit))
            else:
                faults.unknown((*path, key), ("min", "max"))
        if not {"min", "max"} & set(entry):
            faults.adopt(
                path,
                DesignError(
                    "the limit has neither min nor max", expected=f"{metric} = {{ max = {example} }}"
                ),
            )
        low, high = ends.get("min"), ends.get("max")
        if low is not None and high is not None and low > high:
            faults.adopt(
                (*path, "min"),
                DesignError(
                    "the minimum is above the maximum",
                    expected=f"no more than {format_quantity(high, unit)}",
                    found=format_quantity(low, unit),
                ),
            )
        if len(faults.errors) == before:
            limits.append(Limit(metric=metric, min=low, max=high))
    return tuple(limits)
