"""Names and units of columns, from the header of a file."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

__all__ = ["Heading", "headings", "is_number"]

_PREFIXES = {"": 0, "k": 3, "M": 6, "G": 9, "m": -3, "u": -6, "\u00b5": -6, "\u03bc": -6, "n": -9, "p": -12, "f": -15}
_SYMBOLS = {
    "V": "V", "v": "V", "Volt": "V", "Volts": "V", "volt": "V", "volts": "V",
    "A": "A", "Amp": "A", "Ampere": "A",
    "s": "s", "S": "s", "Second": "s", "Seconds": "s", "second": "s", "seconds": "s", "sec": "s",
    "Hz": "Hz", "hz": "Hz", "dB": "dB", "dBm": "dBm", "ohm": "ohm", "Ohm": "ohm",
}  # fmt: skip
_MICRO = {"usec": ("s", 1e-6), "nsec": ("s", 1e-9), "msec": ("s", 1e-3)}
_WITH_UNIT = re.compile(r"^(.*?)\s*[\[(]\s*([^\[\]()]*)\s*[\])]\s*$")


@dataclass(frozen=True)
class Heading:
    """What a column is called.

    Attributes
    ----------
    name : str
        Its name; the number of the column, counted from 1, where the file has none.
    unit : str or None
        V, A, s, Hz, dB, dBm or ohm; None where the file states none.
    scale : float
        What its numbers are multiplied with to have that unit.
    """

    name: str
    unit: str | None = None
    scale: float = 1.0


def is_number(text: str, decimal: str = ".", *, missing: bool = False) -> bool:
    """Tell whether a cell is a finite number.

    Parameters
    ----------
    text : str
        The cell.
    decimal : str
        Decimal sign.
    missing : bool
        Whether an empty cell, NaN and infinity count too.

    Returns
    -------
    bool
        True if so.
    """
    if not text:
        return missing
    if decimal == ",":
        if "." in text:
            return False
        text = text.replace(",", ".")
    if "_" in text:
        return False
    try:
        return math.isfinite(float(text)) or missing
    except ValueError:
        return False


def headings(header: list[list[str]], width: int) -> tuple[Heading, ...]:
    """Name the columns.

    Parameters
    ----------
    header : list of list of str
        Cells of the lines before the numbers.
    width : int
        Columns of numbers.

    Returns
    -------
    tuple of Heading
        From the last line that has a cell for each column, and from a line of units below it.
    """
    rows = [[cell.strip() for cell in row] for row in header if any(cell.strip() for cell in row)]
    rows = [row for row in rows[-2:] if len([cell for cell in row[:width] if cell]) == width]
    units: list[tuple[str, float] | None] = [None] * width
    if rows and all(_unit(cell.strip("[]() ")) for cell in rows[-1][:width]):
        units = [_unit(cell.strip("[]() ")) for cell in rows.pop()[:width]]
    names = rows[-1][:width] if rows else [str(k + 1) for k in range(width)]
    return tuple(_heading(name, unit) for name, unit in zip(names, units, strict=True))


def _heading(name: str, unit: tuple[str, float] | None) -> Heading:
    inside = _WITH_UNIT.match(name)
    if inside and (found := _unit(inside.group(2))):
        return Heading(inside.group(1) or name, *found)
    return Heading(name) if unit is None else Heading(name, *unit)


def _unit(text: str) -> tuple[str, float] | None:
    """Return SI unit and scale of a unit as instruments print it."""
    if text in _MICRO:
        return _MICRO[text]
    if text in _SYMBOLS:
        return _SYMBOLS[text], 1.0
    if text[:1] in _PREFIXES and text[1:] in _SYMBOLS and _SYMBOLS[text[1:]] not in ("dB", "dBm"):
        return _SYMBOLS[text[1:]], 10.0 ** _PREFIXES[text[0]]
    return None
