"""Kinds of value in a design: quantities, counts, choices and lines of text.

Each kind checks a value in one place, both for design files and for models built in Python. A design
file must write units; in Python a float in the SI unit serves as well.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from typing import Any, Protocol, TypeVar

from pydantic import BaseModel, GetCoreSchemaHandler, ValidationInfo
from pydantic.fields import FieldInfo
from pydantic_core import CoreSchema, core_schema

from transim.errors import DesignError
from transim.parts.nearest import nearest_name
from transim.parts.part import Parameter
from transim.quantities import UNITS, format_quantity, format_range, parse_quantity

__all__ = [
    "FROM_FILE",
    "Choice",
    "Count",
    "ElementErrors",
    "Flag",
    "Kind",
    "Line",
    "Quantity",
    "Series",
    "shown",
    "table_keys",
]

_CONTROL = re.compile("[\\x00-\\x1f\\x7f-\\x9f\\u2028\\u2029]")

#: Validation context that says that the values come from a design file.
FROM_FILE = {"from_file": True}


def shown(raw: object) -> str:
    """Return how an error shows a value that it found.

    Parameters
    ----------
    raw : object
        A value of a TOML document.

    Returns
    -------
    str
        The value as TOML writes it, shortened, or the kind of value.
    """
    if isinstance(raw, str):
        text = raw if len(raw) <= 60 else f"{raw[:60]}..."
        return f'"{text}"' if text.isprintable() else repr(text)
    if isinstance(raw, bool):
        return "true" if raw else "false"
    if isinstance(raw, int):
        return str(raw) if abs(raw) < 10**18 else "a number of more than 18 digits"
    if isinstance(raw, float):
        return str(raw)
    if isinstance(raw, dict):
        return "a table"
    if isinstance(raw, list | tuple):
        return "an array" if raw else "an empty array"
    return "a date or time"


T_co = TypeVar("T_co", covariant=True)


class Kind(Protocol[T_co]):
    """What the kinds of value have in common."""

    @property
    def expected(self) -> str:
        """What an error says was expected."""

    def read(self, raw: object, *, from_file: bool) -> T_co:
        """Check a value and return it in the program's own form."""


class ElementErrors(ValueError):
    """Errors of single elements of an array.

    Parameters
    ----------
    errors : list of (int, DesignError)
        Index and error of each.
    """

    def __init__(self, errors: list[tuple[int, DesignError]]) -> None:
        super().__init__("; ".join(str(error) for _, error in errors))
        self.errors = errors


class _Checked:
    """Lets pydantic check an annotated field by the annotation's own `read`."""

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        del source, handler

        def check(raw: Any, info: ValidationInfo) -> Any:
            kind: Kind[Any] = self  # type: ignore[assignment]
            return kind.read(raw, from_file=bool(info.context and info.context.get("from_file")))

        return core_schema.with_info_plain_validator_function(check)


@dataclass(frozen=True)
class Quantity(_Checked):
    """A float with a unit and a permitted range.

    Parameters
    ----------
    unit : str
        Key of `transim.quantities.UNITS`.
    low, high : float
        Permitted range in `unit`.
    low_open : bool
        Whether `low` itself is excluded.
    """

    unit: str
    low: float = -math.inf
    high: float = math.inf
    low_open: bool = False

    @classmethod
    def of(cls, parameter: Parameter) -> Quantity:
        """Return the quantity that a parameter of a part takes.

        Parameters
        ----------
        parameter : Parameter
            Parameter of a part.

        Returns
        -------
        Quantity
            Its unit and range.
        """
        return cls(parameter.unit, parameter.low, parameter.high, parameter.low_open)

    @property
    def expected(self) -> str:
        """What an error says was expected."""
        return UNITS[self.unit].expected

    @property
    def range(self) -> str:
        """Permitted range in engineering notation."""
        return format_range(self.unit, self.low, self.high, self.low_open)

    def read(self, raw: object, *, from_file: bool) -> float:
        """Check a value.

        Parameters
        ----------
        raw : object
            A text with its unit; a number for a plain number and, outside design files, in `unit`.
        from_file : bool
            Whether the value comes from a design file.

        Returns
        -------
        float
            The value in `unit`.

        Raises
        ------
        DesignError
            If it is no such quantity or out of range.
        """
        if isinstance(raw, bool) or not isinstance(raw, str | int | float):
            raise DesignError(
                f"this is not {UNITS[self.unit].quantity}", expected=self.expected, found=shown(raw)
            )
        if isinstance(raw, str):
            if self.unit == "1" and from_file:
                raise DesignError(
                    "a plain number stands without quotes", expected=self.expected, found=shown(raw)
                )
            value = parse_quantity(raw, self.unit)
        elif self.unit != "1" and from_file:
            raise DesignError(
                f'a bare number has no unit; write it as a text, for example "{UNITS[self.unit].example}"',
                expected=self.expected,
                found=shown(raw),
            )
        else:
            value = self._finite(raw)
        above = value > self.low if self.low_open else value >= self.low
        if not (above and value <= self.high):
            raise DesignError(
                "the value is out of range", expected=self.range, found=format_quantity(value, self.unit, 12)
            )
        return value

    def _finite(self, raw: int | float) -> float:
        try:
            value = float(raw)
        except OverflowError:
            value = math.inf
        if not math.isfinite(value):
            raise DesignError("a finite number is wanted", expected=self.expected, found=shown(raw))
        return value


@dataclass(frozen=True)
class Series(_Checked):
    """One quantity or an array of different ones.

    Parameters
    ----------
    quantity : Quantity
        What each element is.
    """

    quantity: Quantity

    @property
    def expected(self) -> str:
        """What an error says was expected."""
        return f"{self.quantity.expected}, or an array of such"

    def read(self, raw: object, *, from_file: bool) -> tuple[float, ...]:
        """Check a value.

        Parameters
        ----------
        raw : object
            One value or a list of values as `Quantity` takes them.
        from_file : bool
            Whether the value comes from a design file.

        Returns
        -------
        tuple of float
            All values, at least one.

        Raises
        ------
        DesignError
            If the value is wrong, or the list empty.
        ElementErrors
            If elements are wrong or stand twice.
        """
        if not isinstance(raw, list | tuple):
            return (self.quantity.read(raw, from_file=from_file),)
        if not raw:
            raise DesignError("at least one value is wanted", expected=self.expected, found=shown(raw))
        values: list[float] = []
        errors: list[tuple[int, DesignError]] = []
        for index, element in enumerate(raw):
            try:
                value = self.quantity.read(element, from_file=from_file)
                if value in values:
                    raise DesignError("the value stands twice in the array", found=shown(element))
                values.append(value)
            except DesignError as exc:
                errors.append((index, exc))
        if errors:
            raise ElementErrors(errors)
        return tuple(values)


@dataclass(frozen=True)
class Count(_Checked):
    """A whole number.

    Parameters
    ----------
    low, high : int
        Permitted range.
    """

    low: int
    high: int

    @property
    def expected(self) -> str:
        """What an error says was expected."""
        return f"a whole number, {self.low} .. {self.high}, without quotes"

    def read(self, raw: object, *, from_file: bool) -> int:
        """Check a value.

        Parameters
        ----------
        raw : object
            An integer.
        from_file : bool
            Without effect: counts have no unit.

        Returns
        -------
        int
            The value.

        Raises
        ------
        DesignError
            If it is no whole number or out of range.
        """
        del from_file
        if isinstance(raw, bool) or not isinstance(raw, int):
            raise DesignError("this is not a whole number", expected=self.expected, found=shown(raw))
        if not self.low <= raw <= self.high:
            raise DesignError("the value is out of range", expected=self.expected, found=shown(raw))
        return raw


@dataclass(frozen=True)
class Flag(_Checked):
    """True or false."""

    @property
    def expected(self) -> str:
        """What an error says was expected."""
        return "true or false, without quotes"

    def read(self, raw: object, *, from_file: bool) -> bool:
        """Check a value.

        Parameters
        ----------
        raw : object
            True or false.
        from_file : bool
            Without effect.

        Returns
        -------
        bool
            The value.

        Raises
        ------
        DesignError
            If it is neither.
        """
        del from_file
        if not isinstance(raw, bool):
            raise DesignError("this is neither true nor false", expected=self.expected, found=shown(raw))
        return raw


@dataclass(frozen=True)
class Choice(_Checked):
    """One of a few words.

    Parameters
    ----------
    options : tuple of str
        The words.
    """

    options: tuple[str, ...]

    @property
    def expected(self) -> str:
        """What an error says was expected."""
        return " or ".join(f'"{option}"' for option in self.options)

    def read(self, raw: object, *, from_file: bool) -> str:
        """Check a value.

        Parameters
        ----------
        raw : object
            One of the words.
        from_file : bool
            Without effect.

        Returns
        -------
        str
            The word.

        Raises
        ------
        DesignError
            If it is none of them.
        """
        del from_file
        if not isinstance(raw, str) or raw not in self.options:
            nearest = nearest_name(raw, self.options) if isinstance(raw, str) else None
            raise DesignError("unknown choice", expected=self.expected, found=shown(raw), nearest=nearest)
        return raw


@dataclass(frozen=True)
class Line(_Checked):
    """Text on one line.

    Parameters
    ----------
    longest : int
        How many characters it may have.
    """

    longest: int

    @property
    def expected(self) -> str:
        """What an error says was expected."""
        return f"text on one line, 1 to {self.longest} characters"

    def read(self, raw: object, *, from_file: bool) -> str:
        """Check a value.

        Parameters
        ----------
        raw : object
            A string.
        from_file : bool
            Without effect.

        Returns
        -------
        str
            The string.

        Raises
        ------
        DesignError
            If it is no string, empty, too long, or has a line break or another control character.
        """
        del from_file
        if not isinstance(raw, str):
            raise DesignError("this is not text", expected=self.expected, found=shown(raw))
        if not raw.strip():
            raise DesignError("the text is empty", expected=self.expected, found=shown(raw))
        if len(raw) > self.longest:
            raise DesignError("the text is too long", expected=self.expected, found=f"{len(raw)} characters")
        if _CONTROL.search(raw):
            raise DesignError(
                "the text has a line break or another control character",
                expected=self.expected,
                found=shown(raw),
            )
        return raw


def table_keys(model: type[BaseModel]) -> dict[str, FieldInfo]:
    """Return the fields of a table by their keys in a design file.

    Parameters
    ----------
    model : type of BaseModel
        The table.

    Returns
    -------
    dict of str to FieldInfo
        A key that is a word of Python (`from`) belongs to a field of another name.
    """
    return {field.alias or name: field for name, field in model.model_fields.items()}
