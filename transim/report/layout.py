"""Lines of text: columns side by side, sentences broken to the width of a page."""

from __future__ import annotations

import re
import textwrap
from collections.abc import Sequence
from dataclasses import dataclass

__all__ = ["GAP", "WIDTH", "Column", "align", "wrap"]

#: Longest line of any output that is not a name of the user's own.
WIDTH = 100
#: What stands between two columns.
GAP = "  "
_GLUE = "\N{NO-BREAK SPACE}"
_BEFORE_UNIT = re.compile(r"(?<=\d) (?=[A-Za-z%])")


@dataclass(frozen=True)
class Column:
    """A column of a table: its heading, its cells, and the side that they are aligned to."""

    heading: str
    cells: tuple[str, ...]
    right: bool = False

    @property
    def width(self) -> int:
        """Characters of the widest cell or heading."""
        return max(map(len, (self.heading, *self.cells)))


def align(columns: Sequence[Column], indent: str = "") -> list[str]:
    """Set columns side by side.

    Parameters
    ----------
    columns : sequence of Column
        Of equal length.
    indent : str
        What every line starts with.

    Returns
    -------
    list of str
        Lines; the first holds the headings, unless all of them are empty.
    """
    lines = []
    rows = zip(*((column.heading, *column.cells) for column in columns), strict=True)
    for row in rows:
        cells = [
            cell.rjust(column.width) if column.right else cell.ljust(column.width)
            for cell, column in zip(row, columns, strict=True)
        ]
        lines.append((indent + GAP.join(cells)).rstrip())
    return lines if any(column.heading for column in columns) else lines[1:]


def wrap(text: str, indent: str = "", hanging: str = "  ") -> list[str]:
    """Break a sentence into lines of at most `WIDTH` characters.

    Parameters
    ----------
    text : str
        The sentence.
    indent, hanging : str
        What the first line starts with, and what the others start with after that.

    Returns
    -------
    list of str
        The lines; a single word that is longer stays whole.
    """
    lines = textwrap.wrap(
        # a number stays on the line of its unit
        _BEFORE_UNIT.sub(_GLUE, text),
        WIDTH,
        initial_indent=indent,
        subsequent_indent=indent + hanging,
        break_long_words=False,
        break_on_hyphens=False,
    )
    return [line.replace(_GLUE, " ") for line in lines]
