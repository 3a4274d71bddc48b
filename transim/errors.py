"""Every error that transim raises on purpose, and the exit status that each one maps to.

::

    TransimError                       exit 3
    |- DesignError (also ValueError)   exit 2   file, line, column, key, expected, found, nearest
    |  |- QuantityError                         a text that is no quantity of the wanted unit
    |  |- TopologyError                         a node, port or terminal that does not fit
    |  `- InvalidDesign                         all the errors of one design file together
    |- NetlistError                    exit 2   file, line: a part file, model card or netlist
    |  |- LinearisationError                    an element that the envelope solver refuses, by name
    |  `- RecordError                           file, line: measured data that cannot be used
    |- OutputError                     exit 2   a result folder or file that cannot be written
    |- StudyError                      exit 2   a study that cannot start here or go on: another one, no cluster
    |- EngineError                     exit 3   command, return code, log tail, deck kept at
    |  |- EngineNotFound
    |  |- DeckRejected
    |  |- EngineTimeout
    |  |- EngineCrashed
    |  |- RawFileError
    |  `- ConvergenceError                      time reached, stop time
    `- MeasurementError                exit 4   metric, level, span: a figure that does not exist

The command line catches ``TransimError`` and nothing else.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

__all__ = [
    "ConvergenceError",
    "DeckRejected",
    "DesignError",
    "EngineCrashed",
    "EngineError",
    "EngineNotFound",
    "EngineTimeout",
    "InvalidDesign",
    "LinearisationError",
    "MeasurementError",
    "NetlistError",
    "OutputError",
    "QuantityError",
    "RawFileError",
    "RecordError",
    "StudyError",
    "TopologyError",
    "TransimError",
]


class TransimError(Exception):
    """Root of the tree; `exit_code` is the exit status of the command that ends with it."""

    exit_code = 3

    def __init__(self, message: str) -> None:
        super().__init__(message)
        self.message = message

    def records(self) -> list[dict[str, Any]]:
        """Return the error as JSON-ready dictionaries (file, line, column, key, message)."""
        return [{"file": None, "line": None, "column": None, "key": None, "message": self.message}]


class DesignError(TransimError, ValueError):
    """A value in a design file that cannot be used.

    Parameters
    ----------
    message : str
        What was asked and what to change.
    file : Path or None
        The design file.
    line, column : int or None
        Place in the file, counted from 1.
    key : str or None
        Dotted key, for example ``driver.fast.speedup_cap``.
    expected, found : str or None
        What would have been accepted and what stands there.
    nearest : str or None
        The known name closest to the one that was found.
    """

    exit_code = 2

    def __init__(  # noqa: PLR0913 - an error keeps its whole context
        self,
        message: str,
        *,
        file: Path | None = None,
        line: int | None = None,
        column: int | None = None,
        key: str | None = None,
        expected: str | None = None,
        found: str | None = None,
        nearest: str | None = None,
    ) -> None:
        super().__init__(message)
        self.file = file
        self.line = line
        self.column = column
        self.key = key
        self.expected = expected
        self.found = found
        self.nearest = nearest

    def __str__(self) -> str:
        place = ""
        if self.file is not None:
            place = str(self.file)
            if self.line is not None:
                place += f":{self.line}"
                if self.column is not None:
                    place += f":{self.column}"
            place += ": "
        text = f"{place}{self.key}: {self.message}" if self.key else f"{place}{self.message}"
        details = []
        if self.expected:
            details.append(f"expected {self.expected}")
        if self.found:
            details.append(f"found {self.found}")
        if details:
            text += f" ({'; '.join(details)})"
        if self.nearest:
            text += f"; did you mean {self.nearest}?"
        return text

    def records(self) -> list[dict[str, Any]]:
        """Return the error as one JSON-ready dictionary."""
        return [
            {
                "file": None if self.file is None else str(self.file),
                "line": self.line,
                "column": self.column,
                "key": self.key,
                "message": self.message,
                "expected": self.expected,
                "found": self.found,
                "nearest": self.nearest,
            }
        ]


class QuantityError(DesignError):
    """A text that is no quantity, or a quantity of another unit than the wanted one."""


class TopologyError(DesignError):
    """A node, port or terminal that does not fit the circuit it is used in."""


class InvalidDesign(DesignError):
    """All errors that one design file has, reported together.

    Parameters
    ----------
    errors : sequence of DesignError
        The single errors, in the order of the file.
    """

    def __init__(self, errors: Sequence[DesignError]) -> None:
        self.errors = tuple(errors)
        super().__init__(f"{len(self.errors)} error{'s' if len(self.errors) != 1 else ''} in the design")

    def __str__(self) -> str:
        return "\n".join(str(error) for error in self.errors)

    def records(self) -> list[dict[str, Any]]:
        """Return one JSON-ready dictionary for each error."""
        return [record for error in self.errors for record in error.records()]


class NetlistError(TransimError):
    """A part file, model card or netlist that cannot be used.

    Parameters
    ----------
    message : str
        What is wrong and what to change.
    file : Path or None
        The file.
    line : int or None
        Its line, counted from 1.
    """

    exit_code = 2

    def __init__(self, message: str, *, file: Path | None = None, line: int | None = None) -> None:
        super().__init__(message)
        self.file = file
        self.line = line

    def __str__(self) -> str:
        if self.file is None:
            return self.message
        place = f"{self.file}:{self.line}" if self.line is not None else str(self.file)
        return f"{place}: {self.message}"

    def records(self) -> list[dict[str, Any]]:
        """Return the error as one JSON-ready dictionary."""
        file = None if self.file is None else str(self.file)
        return [{"file": file, "line": self.line, "column": None, "key": None, "message": self.message}]


class LinearisationError(NetlistError):
    """An element that the envelope solver cannot linearise.

    Parameters
    ----------
    element : str
        Name of the element in the flattened netlist.
    reason : str
        What it is and what to do instead.
    """

    def __init__(self, element: str, reason: str) -> None:
        super().__init__(f"{element}: {reason}")
        self.element = element
        self.reason = reason


class RecordError(NetlistError):
    """A file of measured data, or a document of a record, that cannot be used.

    Parameters
    ----------
    message : str
        What is wrong and what to change.
    file : Path or None
        The file.
    line : int or None
        Its line, counted from 1.
    """


class OutputError(TransimError):
    """A result folder or file that cannot be written, or would be overwritten."""

    exit_code = 2


class StudyError(TransimError):
    """A study that cannot be started or gone on with: another one in its folder, or workers that cannot be reached."""

    exit_code = 2


class EngineError(TransimError):
    """ngspice is missing or failed.

    Parameters
    ----------
    message : str
        What happened and what to change.
    command : sequence of str
        The command line that was run.
    return_code : int or None
        Its exit status; negative for a signal.
    log_tail : str
        The last lines that ngspice printed.
    deck : Path or None
        Where the deck was kept.
    """

    def __init__(
        self,
        message: str,
        *,
        command: Sequence[str] = (),
        return_code: int | None = None,
        log_tail: str = "",
        deck: Path | None = None,
    ) -> None:
        super().__init__(message)
        self.command = tuple(command)
        self.return_code = return_code
        self.log_tail = log_tail
        self.deck = deck

    def __str__(self) -> str:
        lines = [self.message]
        if self.log_tail:
            lines.append("ngspice said:")
            lines.extend(f"  | {line}" for line in self.log_tail.splitlines())
        if self.deck is not None:
            lines.append(f"The deck was kept at {self.deck}")
        return "\n".join(lines)

    def records(self) -> list[dict[str, Any]]:
        """Return the error as one JSON-ready dictionary."""
        return [
            {
                "file": None if self.deck is None else str(self.deck),
                "line": None,
                "column": None,
                "key": None,
                "message": self.message,
                "return_code": self.return_code,
                "log": self.log_tail.splitlines(),
            }
        ]


class EngineNotFound(EngineError):
    """No ngspice executable was found where it was looked for."""


class DeckRejected(EngineError):
    """ngspice refused the deck: a syntax error, an unknown model, no analysis."""


class EngineTimeout(EngineError):
    """ngspice ran longer than the time limit and was stopped."""


class EngineCrashed(EngineError):
    """ngspice was ended by a signal."""


class RawFileError(EngineError):
    """The raw file is missing, truncated or not understood."""


class ConvergenceError(EngineError):
    """ngspice found no solution, at the operating point or at some time of a transient.

    Parameters
    ----------
    message : str
        What happened and what to change.
    time_reached, stop : float or None
        How far the transient came and how far it should have come [s]; None at an operating point.
    **context
        As for `EngineError`.
    """

    def __init__(
        self, message: str, *, time_reached: float | None = None, stop: float | None = None, **context: Any
    ) -> None:
        super().__init__(message, **context)
        self.time_reached = time_reached
        self.stop = stop


class MeasurementError(TransimError):
    """A figure that does not exist in a waveform: a level that is never crossed, no settled state.

    Parameters
    ----------
    message : str
        The reason, as it will stand beside the metric.
    level : float or None
        The level that was looked for, in the waveform's unit.
    span : tuple of float or None
        Time span that was searched [s].
    """

    exit_code = 4

    def __init__(
        self, message: str, *, level: float | None = None, span: tuple[float, float] | None = None
    ) -> None:
        super().__init__(message)
        self.level = level
        self.span = span
