"""Tables of numbers as oscilloscopes write them: separators, headers and units are found, not asked for."""

from __future__ import annotations

import csv
import re
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import numpy.typing as npt

from transim.bench.headings import Heading, headings, is_number
from transim.errors import RecordError
from transim.parts.nearest import nearest_name
from transim.quantities import parse_quantity

__all__ = ["Table", "read_table"]

Array = npt.NDArray[np.float64]

#: Lines in which the layout is looked for.
_SAMPLE = 400
_SEPARATORS = {"\t": "tabs", ";": "semicolons", ",": "commas"}
_INTERVAL = re.compile(r"(sample|sampling|time|x)?[ _]*(interval|increment|incr|step|delta)\b", re.IGNORECASE)


@dataclass(frozen=True)
class Table:
    """The columns of a file.

    Attributes
    ----------
    file : Path
        Where it was read.
    headings : tuple of Heading
        Name and unit of each column.
    lines : list of str
        Every line of the file.
    first : int
        Index of the first line of numbers; those before it are the header.
    separator : str
        What stands between two cells.
    decimal : str
        Decimal sign.
    """

    file: Path
    headings: tuple[Heading, ...]
    lines: list[str]
    first: int
    separator: str
    decimal: str

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the columns."""
        return tuple(heading.name for heading in self.headings)

    def index(self, wanted: str, purpose: str) -> int:
        """Find a column by its name, or by its number counted from 1.

        Parameters
        ----------
        wanted : str
            What the user wrote.
        purpose : str
            What the column is for, for a message.

        Returns
        -------
        int
            Index of the column.

        Raises
        ------
        RecordError
            If there is no such column, or several.
        """
        for same in (str, str.casefold):
            found = [k for k, name in enumerate(self.names) if same(name) == same(wanted.strip())]
            if len(found) == 1:
                return found[0]
            if found:
                raise self.refuse(f"{purpose}: {len(found)} columns are called {wanted}; name it by its number")
        if wanted.isdecimal() and 1 <= int(wanted) <= len(self.names):
            return int(wanted) - 1
        nearest = nearest_name(wanted, self.names)
        hint = f"; did you mean {nearest}?" if nearest else ""
        raise self.refuse(
            f"{purpose}: there is no column {wanted}; the columns are {', '.join(self.names)}{hint}", header=True
        )

    def columns(self, indices: list[int]) -> Array:
        """Read columns, in SI units.

        Parameters
        ----------
        indices : list of int
            Which ones.

        Returns
        -------
        ndarray, shape (k, n)
            Their numbers, finite.

        Raises
        ------
        RecordError
            At the first cell that is empty, no number or not finite, with its line.
        """
        body = [line for line in self.lines[self.first :] if line.strip(" \t;,\r")]
        if self.decimal == ",":
            body = [line.replace(",", ".") for line in body]
        if any('"' in line for line in body[:_SAMPLE]):
            body = [line.replace('"', "") for line in body]
        try:
            data = np.loadtxt(body, delimiter=self.separator, usecols=indices, ndmin=2, comments=None)
        except (ValueError, IndexError):
            raise self._bad_cell(indices) from None
        if not np.all(np.isfinite(data)):
            raise self._bad_cell(indices)
        scale = np.array([[self.headings[k].scale] for k in indices])
        return np.asarray(np.ascontiguousarray(data.T) * scale, dtype=np.float64)

    def header_interval(self) -> float | None:
        """Return the sample interval that the header states.

        Returns
        -------
        float or None
            [s]; None if it states none.
        """
        for line in self.lines[: self.first]:
            cells = [cell.strip().strip('"') for cell in re.split(r"[\t;,:=]", line)]
            if not _INTERVAL.match(cells[0]):
                continue
            for text in (" ".join(cells[1:3]), *cells[1:]):
                number = text.replace("Sec", "s").replace("sec", "s")
                try:
                    return parse_quantity(number, "s", require_unit=False)
                except ValueError:
                    continue
        return None

    def refuse(self, message: str, *, line: int | None = None, header: bool = False) -> RecordError:
        """Return an error about this file.

        Parameters
        ----------
        message : str
            What is wrong and what to change.
        line : int or None
            Where, counted from 1.
        header : bool
            Whether it is about the names of the columns.

        Returns
        -------
        RecordError
            To be raised.
        """
        return RecordError(message, file=self.file, line=max(self.first, 1) if header else line)

    def _bad_cell(self, indices: list[int]) -> RecordError:
        for number, line in enumerate(self.lines[self.first :], self.first + 1):
            if not line.strip(" \t;,\r"):
                continue
            cells = [cell.strip().strip('"') for cell in line.split(self.separator)]
            for k in indices:
                text = cells[k] if k < len(cells) else ""
                if not is_number(text, self.decimal):
                    short = "found an empty cell" if k < len(cells) else "the line is short"
                    found = f"found {text}" if text else short
                    return self.refuse(
                        f"column {self.names[k]}: a finite number is wanted, {found}; correct or remove the line",
                        line=number,
                    )
        return self.refuse("the numbers cannot be read")


def read_table(file: Path) -> Table:
    """Read a file of separated numbers.

    Parameters
    ----------
    file : Path
        Text in UTF-8, UTF-16 or Latin-1: any lines of header, then rows of numbers separated by commas,
        semicolons or tabs; with semicolons and tabs the decimal sign may be a comma.

    Returns
    -------
    Table
        Its layout; the numbers are read when a column is asked for.

    Raises
    ------
    RecordError
        If the file cannot be read or has no rows of numbers.
    """
    lines = _text(file).splitlines()
    separator, decimal, first = _layout(file, lines)
    header = [_cells(line, separator) for line in lines[:first]]
    width = len(_trimmed(_cells(lines[first], separator)))
    return Table(file, headings(header, width), lines, first, separator, decimal)


def _text(file: Path) -> str:
    try:
        raw = file.read_bytes()
    except OSError as error:
        raise RecordError(f"cannot be read: {error.strerror}", file=file) from None
    if raw.startswith((b"\xff\xfe", b"\xfe\xff")):
        return raw.decode("utf-16", errors="replace")
    if b"\0" in raw[:4096]:
        raise RecordError("this is no text; export the record as comma-separated values", file=file)
    try:
        return raw.decode("utf-8-sig")
    except UnicodeDecodeError:
        return raw.decode("latin-1")


def _layout(file: Path, lines: list[str]) -> tuple[str, str, int]:
    """Return separator, decimal sign and index of the first row of numbers."""
    best: tuple[int, str, str, int] | None = None
    for separator in _SEPARATORS:
        for decimal in (".", ",") if separator != "," else (".",):
            first, count = _rows(lines, separator, decimal)
            if count >= 2 and (best is None or count > best[0]):
                best = (count, separator, decimal, first)
    if best is None:
        raise RecordError(
            "no rows of numbers: expected columns separated by commas, semicolons or tabs", file=file, line=1
        )
    _, separator, decimal, first = best
    # the first rows may hold whole numbers only
    if separator != "," and any("," in line for line in lines[first:]):
        decimal = ","
    return separator, decimal, first


def _rows(lines: list[str], separator: str, decimal: str) -> tuple[int, int]:
    """Return the index of the first row of numbers, and how many follow it in the sample."""
    first, count, width = 0, 0, 0
    for number, line in enumerate(lines):
        cells = _trimmed(line.split(separator))
        if not any(cells):
            continue
        numbers = [is_number(cell, decimal, missing=True) for cell in cells]
        single = len(cells) == 1 and separator != ","
        if not all(numbers) or single:
            # a bad cell among good ones is a fault of the row, not the end of the header
            if count >= 2 and len(cells) == width:
                continue
            first, count = number + 1, 0
            if number > 10 * _SAMPLE:
                break
            continue
        if count == 0:
            first = number
        count, width = count + 1, len(cells)
        if count >= _SAMPLE:
            break
    return first, count


def _cells(line: str, separator: str) -> list[str]:
    return next(csv.reader([line], delimiter=separator, skipinitialspace=True), [])


def _trimmed(cells: list[str]) -> list[str]:
    """Return stripped cells without the empty ones at the end."""
    cells = [cell.strip().strip('"').strip() for cell in cells]
    while cells and not cells[-1]:
        cells.pop()
    return cells


