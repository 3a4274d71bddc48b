"""Axes of a study: a parameter of the design and the values that it takes."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from typing import TypeVar

from transim.design.faults import Faults
from transim.design.fields import Choice, Count, Kind, Quantity, shown
from transim.design.locate import KeyPath
from transim.design.preferred import SERIES, preferred_values
from transim.errors import DesignError
from transim.parts.nearest import nearest_name
from transim.quantities import format_quantity

__all__ = ["LONGEST_AXIS", "STEPS", "Axis", "parameter_entries", "read_axis"]

#: How a range may be stepped through.
STEPS = ("linear", "logarithmic", *SERIES)
#: Most values that one axis may have.
LONGEST_AXIS = 10_000
_KEYS = ("from", "to", "steps", "points", "values")
_EXAMPLE = '{ from = "100 pF", to = "10 nF", steps = "E24" }'

T = TypeVar("T")


@dataclass(frozen=True)
class Axis:
    """A parameter and the values that it takes, in increasing or in the written order.

    Attributes
    ----------
    parameter : str
        Dotted name.
    unit : str
        Unit of the values.
    values : tuple of float
        At least one, all different [`unit`].
    steps : str
        ``values``, ``linear``, ``logarithmic`` or a series of preferred numbers.
    """

    parameter: str
    unit: str
    values: tuple[float, ...]
    steps: str

    @property
    def logarithmic(self) -> bool:
        """Whether equal steps are equal ratios."""
        return self.steps not in ("values", "linear") or (
            self.steps == "values" and min(self.values) > 0.0 and max(self.values) > 9.0 * min(self.values)
        )


def parameter_entries(
    faults: Faults, path: KeyPath, raw: Mapping[str, object], known: Mapping[str, Quantity]
) -> Iterator[tuple[KeyPath, str, object]]:
    """Find the parameters that a table names, written as dotted keys with or without quotes.

    Parameters
    ----------
    faults : Faults
        Where errors go.
    path : tuple of str
        Key of the table.
    raw : mapping
        The table.
    known : mapping of str to Quantity
        Parameters of the design.

    Yields
    ------
    tuple
        Key of the entry in the file, dotted name, and what stands there.
    """
    depth = len(path)

    def walk(place: KeyPath, table: Mapping[str, object]) -> Iterator[tuple[KeyPath, str, object]]:
        for key, value in table.items():
            here = (*place, key)
            name = ".".join(map(str, here[depth:]))
            if name in known:
                yield here, name, value
            elif isinstance(value, dict) and any(other.startswith(f"{name}.") for other in known):
                yield from walk(here, value)
            else:
                faults.adopt(
                    here,
                    DesignError(
                        "the design has no such parameter",
                        expected=f"one of {', '.join(_similar(name, known))}",
                        found=shown(name),
                        nearest=nearest_name(name, known),
                    ),
                )

    yield from walk(path, raw)


def _similar(name: str, known: Mapping[str, Quantity]) -> list[str]:
    """Return the parameters with the longest beginning in common with a name."""
    table = name
    while table:
        table = table.rpartition(".")[0]
        found = [other for other in known if other.startswith(f"{table}.")]
        if table and found:
            return found
    return [other for other in known if other.startswith("driver.")]


def read_axis(
    faults: Faults, path: KeyPath, name: str, raw: object, quantity: Quantity, default: str | None = None
) -> Axis | None:
    """Read one axis.

    Parameters
    ----------
    faults : Faults
        Where errors go.
    path : tuple of str
        Its key.
    name : str
        Dotted name of the parameter.
    raw : object
        ``{ from, to, steps, points }`` or ``{ values }``.
    quantity : Quantity
        Unit and range of the parameter.
    default : str or None
        Steps where the entry names none; None: they must be named.

    Returns
    -------
    Axis or None
        None, with errors added, if something is wrong.
    """
    if not isinstance(raw, dict):
        faults.adopt(path, DesignError("a range or values are wanted", expected=_EXAMPLE, found=shown(raw)))
        return None
    before = len(faults.errors)
    for key in raw:
        if key not in _KEYS:
            faults.unknown((*path, key), _KEYS)
    if "values" in raw:
        values = _listed(faults, path, raw, quantity)
        return None if len(faults.errors) > before else Axis(name, quantity.unit, values, "values")
    ends = {}
    for key in ("from", "to"):
        if key in raw:
            ends[key] = faults.value((*path, key), raw[key], quantity)
        else:
            faults.missing((*path, key), quantity.expected)
    steps = faults.value((*path, "steps"), raw["steps"], Choice(STEPS)) if "steps" in raw else default
    if steps is None and "steps" not in raw:
        faults.missing((*path, "steps"), f"one of {', '.join(STEPS)}")
    if len(faults.errors) > before or steps is None:
        return None
    low, high = ends["from"], ends["to"]
    if low is None or high is None:
        return None
    found = _guarded(faults, path, lambda: _range(faults, path, raw, quantity, (low, high), steps))
    return None if found is None or len(faults.errors) > before else Axis(name, quantity.unit, found, steps)


def _listed(faults: Faults, path: KeyPath, raw: Mapping[str, object], quantity: Quantity) -> tuple[float, ...]:
    listed = raw["values"]
    for key in raw:
        if key != "values" and key in _KEYS:
            faults.adopt(
                (*path, key), DesignError("values are listed, so that there is no range; remove one of the two")
            )
    if not isinstance(listed, list) or not listed:
        faults.adopt(
            (*path, "values"),
            DesignError("an array of values is wanted", expected=quantity.expected, found=shown(listed)),
        )
        return ()
    values = [faults.value((*path, "values", index), value, quantity) for index, value in enumerate(listed)]
    for index, value in enumerate(values):
        if value is not None and value in values[:index]:
            faults.adopt((*path, "values", index), DesignError("the value stands twice", found=shown(listed[index])))
    return tuple(value for value in values if value is not None)


def _guarded(faults: Faults, path: KeyPath, read: Callable[[], T]) -> T | None:
    try:
        return read()
    except DesignError as exc:
        faults.adopt(path, exc)
        return None


def _range(
    faults: Faults,
    path: KeyPath,
    raw: Mapping[str, object],
    quantity: Quantity,
    ends: tuple[float, float],
    steps: str,
) -> tuple[float, ...] | None:
    """Return the values of a range."""
    low, high = ends
    unit = quantity.unit
    if high <= low:
        raise DesignError(
            "the range is empty",
            expected=f"to above from, {format_quantity(low, unit)}",
            found=format_quantity(high, unit),
        )
    if steps != "linear" and low <= 0.0:
        raise DesignError(
            f"{steps} steps need a range above zero",
            expected="a from above zero, or linear steps",
            found=format_quantity(low, unit),
        )
    if steps in SERIES:
        if "points" in raw:
            faults.adopt((*path, "points"), DesignError(f"{steps} gives the number of points by itself; remove this"))
            return None
        values = preferred_values(steps, low, high)
        if not values:
            raise DesignError(
                f"no value of {steps} is in the range",
                found=f"{format_quantity(low, unit)} .. {format_quantity(high, unit)}",
            )
        return tuple(value for value in values if _within(quantity, value))
    if "points" not in raw:
        faults.missing((*path, "points"), Count(2, LONGEST_AXIS).expected)
        return None
    count = faults.value((*path, "points"), raw["points"], Count(2, LONGEST_AXIS))
    if count is None:
        return None
    return _spaced(low, high, count, steps == "logarithmic")


def _spaced(low: float, high: float, count: int, logarithmic: bool) -> tuple[float, ...]:
    """Return evenly spaced values with exact ends, each as its decimal number of twelve digits."""
    shares = [place / (count - 1) for place in range(1, count - 1)]
    if logarithmic:
        span = math.log(high / low)
        inner = [low * math.exp(share * span) for share in shares]
    else:
        inner = [low + share * (high - low) for share in shares]
    return (low, *(float(f"{value:.12g}") for value in inner), high)


def _within(quantity: Quantity, value: float) -> bool:
    kind: Kind[float] = quantity
    try:
        kind.read(value, from_file=False)
    except DesignError:
        return False
    return True
