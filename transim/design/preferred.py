"""Preferred numbers for components: the E series of IEC 60063."""

from __future__ import annotations

import math
from collections.abc import Mapping
from types import MappingProxyType

__all__ = ["SERIES", "nearest_preferred", "preferred_values"]

# The standard lists E24; it is not the rounded geometric series (27, 30, 33, 36, 39, 43, 47, 82 differ from it).
_E24 = (10, 11, 12, 13, 15, 16, 18, 20, 22, 24, 27, 30, 33, 36, 39, 43, 47, 51, 56, 62, 68, 75, 82, 91)


def _fine(count: int) -> tuple[int, ...]:
    return tuple(round(100.0 * 10.0 ** (place / count)) for place in range(count))


#: Digits of one decade of each series; two digits up to E24, three from E48.
SERIES: Mapping[str, tuple[int, ...]] = MappingProxyType(
    {"E6": _E24[::4], "E12": _E24[::2], "E24": _E24, "E48": _fine(48), "E96": _fine(96)}
)
#: Ends of a range may be off a preferred value by the rounding of their text.
_ROUNDING = 1e-9


def preferred_values(series: str, low: float, high: float) -> tuple[float, ...]:
    """Return the preferred values within a range, both ends included.

    Parameters
    ----------
    series : str
        A key of `SERIES`.
    low, high : float
        Ends of the range, in any unit, above zero.

    Returns
    -------
    tuple of float
        Increasing; each is the float nearest to its decimal number.

    References
    ----------
    IEC 60063:2015, Preferred number series for resistors and capacitors.

    Examples
    --------
    >>> preferred_values("E6", 1e-9, 10e-9)
    (1e-09, 1.5e-09, 2.2e-09, 3.3e-09, 4.7e-09, 6.8e-09, 1e-08)
    """
    digits = SERIES[series]
    places = len(str(digits[0])) - 1
    first, last = math.floor(math.log10(low)) - 1, math.floor(math.log10(high)) + 1
    values = [float(f"{number}e{power - places}") for power in range(first, last + 1) for number in digits]
    return tuple(value for value in values if low * (1.0 - _ROUNDING) <= value <= high * (1.0 + _ROUNDING))


def nearest_preferred(series: str, value: float) -> float:
    """Return the preferred value nearest in ratio.

    Parameters
    ----------
    series : str
        A key of `SERIES`.
    value : float
        Any value above zero.

    Returns
    -------
    float
        The preferred value.

    Examples
    --------
    >>> nearest_preferred("E12", 33.436e-12)
    3.3e-11
    """
    near = preferred_values(series, value / 3.0, value * 3.0)
    return min(near, key=lambda candidate: abs(math.log(candidate / value)))
