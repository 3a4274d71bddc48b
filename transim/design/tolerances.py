"""Tolerances: how a parameter spreads around its nominal value."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass

from transim.design.faults import Faults
from transim.design.fields import Choice, Line, Quantity, shown
from transim.design.locate import KeyPath
from transim.errors import DesignError
from transim.quantities import format_quantity

__all__ = ["DISTRIBUTIONS", "Tolerance", "read_tolerance"]

#: How values are distributed between the two ends.
DISTRIBUTIONS = ("uniform", "normal", "corners")
_KEYS = ("tolerance", "from", "to", "distribution", "sigmas", "lot", "correlation")
_PERCENT = re.compile(r"\s*(?P<number>[0-9]+(?:\.[0-9]*)?|\.[0-9]+)\s*%\s*")
#: Units in which a share of the value says nothing.
_LEVELS = ("dB", "dBm", "degC", "deg")
_EXAMPLE = '{ tolerance = "5 %" }, or { from = "0.8 us", to = "1.5 us" }'


@dataclass(frozen=True)
class Tolerance:
    """A parameter and its spread.

    Attributes
    ----------
    parameter : str
        Dotted name.
    unit : str
        Unit of the values.
    nominal, low, high : float
        Nominal value and the ends that it never leaves [`unit`].
    distribution : {"uniform", "normal", "corners"}
        Uniform between the ends; normal around their middle, cut off at them; or either end alike.
    sigmas : float
        Of a normal distribution: standard deviations from the middle to an end.
    lot : str or None
        Parameters of the same lot move together.
    correlation : float
        With the lot's common factor, -1 .. 1.
    """

    parameter: str
    unit: str
    nominal: float
    low: float
    high: float
    distribution: str = "uniform"
    sigmas: float = 3.0
    lot: str | None = None
    correlation: float = 1.0


def read_tolerance(
    faults: Faults, path: KeyPath, name: str, raw: object, quantity: Quantity, nominal: float | None
) -> Tolerance | None:
    """Read the tolerance of one parameter.

    Parameters
    ----------
    faults : Faults
        Where errors go.
    path : tuple of str
        Its key.
    name : str
        Dotted name of the parameter.
    raw : object
        What stands there.
    quantity : Quantity
        Unit and range of the parameter.
    nominal : float or None
        Its value in the design; None where the design has several.

    Returns
    -------
    Tolerance or None
        None, with errors added, if something is wrong.
    """
    if not isinstance(raw, dict):
        faults.adopt(path, DesignError("a tolerance is wanted", expected=_EXAMPLE, found=shown(raw)))
        return None
    before = len(faults.errors)
    for key in raw:
        if key not in _KEYS:
            faults.unknown((*path, key), _KEYS)
    distribution = faults.value((*path, "distribution"), raw.get("distribution", "uniform"), Choice(DISTRIBUTIONS))
    sigmas = faults.value((*path, "sigmas"), raw.get("sigmas", 3.0), Quantity("1", 0.1, 10.0))
    correlation = faults.value((*path, "correlation"), raw.get("correlation", 1.0), Quantity("1", -1.0, 1.0))
    lot = faults.value((*path, "lot"), raw["lot"], Line(40)) if "lot" in raw else None
    for key, needs, met in (
        ("sigmas", 'distribution = "normal"', distribution == "normal"),
        ("correlation", "a lot", "lot" in raw),
    ):
        if key in raw and not met:
            faults.adopt((*path, key), DesignError(f"the key has an effect only with {needs}"))
    ends = _ends(faults, path, raw, quantity, nominal)
    if len(faults.errors) > before or ends is None or None in (distribution, sigmas, correlation):
        return None
    low, high = ends
    middle = 0.5 * (low + high) if nominal is None else nominal
    return Tolerance(
        name, quantity.unit, middle, low, high, str(distribution), float(sigmas or 3.0), lot, float(correlation or 0.0)
    )


def _ends(
    faults: Faults, path: KeyPath, raw: Mapping[str, object], quantity: Quantity, nominal: float | None
) -> tuple[float, float] | None:
    """Return the two ends, from a range or from a tolerance."""
    unit = quantity.unit
    if "tolerance" not in raw:
        return _range(faults, path, raw, quantity)
    place = (*path, "tolerance")
    for key in ("from", "to"):
        if key in raw:
            faults.adopt(
                (*path, key), DesignError("a tolerance is given, so that there is no range; remove one of the two")
            )
    if nominal is None:
        faults.adopt(
            place,
            DesignError("the design has several values of this parameter", expected="from and to, without tolerance"),
        )
        return None
    width = _width(faults, place, raw["tolerance"], unit, nominal)
    if width is None:
        return None
    low, high = (float(f"{end:.12g}") for end in (nominal - width, nominal + width))
    for end in (low, high):
        if faults.value(place, end if unit == "1" else format_quantity(end, unit, 12), quantity) is None:
            return None
    return low, high


def _range(
    faults: Faults, path: KeyPath, raw: Mapping[str, object], quantity: Quantity
) -> tuple[float, float] | None:
    unit = quantity.unit
    found = {}
    for key in ("from", "to"):
        if key not in raw:
            faults.missing((*path, key), f"{quantity.expected}, or a tolerance in place of from and to")
        else:
            found[key] = faults.value((*path, key), raw[key], quantity)
    low, high = found.get("from"), found.get("to")
    if low is None or high is None:
        return None
    if high <= low:
        faults.adopt(
            (*path, "to"),
            DesignError(
                "the range is empty",
                expected=f"more than {format_quantity(low, unit)}",
                found=format_quantity(high, unit),
            ),
        )
        return None
    return low, high


def _width(faults: Faults, path: KeyPath, raw: object, unit: str, nominal: float) -> float | None:
    """Return half the width that a tolerance stands for, in the unit of the parameter."""
    percent = _PERCENT.fullmatch(raw) if isinstance(raw, str) else None
    if percent is None:
        width = faults.value(path, raw, Quantity(unit, 0.0, math.inf, True))
        if width is None and isinstance(raw, str | int | float):
            faults.errors[-1].expected = f'a share of the value such as "5 %", or {faults.errors[-1].expected}'
        return width
    if unit in _LEVELS:
        faults.adopt(
            path,
            DesignError(
                f"a share of a value in {unit} says nothing", expected=f"a tolerance in {unit}", found=shown(raw)
            ),
        )
        return None
    share = float(percent["number"]) / 100.0
    if nominal == 0.0 or share == 0.0:
        what = "the nominal value is zero" if nominal == 0.0 else "the tolerance is zero"
        faults.adopt(path, DesignError(f"{what}, so that nothing spreads", found=shown(raw)))
        return None
    return share * abs(nominal)
