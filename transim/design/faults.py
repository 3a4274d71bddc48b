"""The faults of one design file, collected with their places and reported together."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import TypeVar

from pydantic import BaseModel, ValidationError

from transim.design.fields import FROM_FILE, ElementErrors, Kind, shown, table_keys
from transim.design.locate import KeyPath, Locations, dotted
from transim.errors import DesignError, InvalidDesign
from transim.parts.nearest import nearest_name

__all__ = ["Faults"]

T = TypeVar("T", bound=BaseModel)
V = TypeVar("V")


class Faults:
    """Collects errors of a design file.

    Parameters
    ----------
    file : Path
        The design file.
    text : str
        Its text, in which the keys are looked up.
    """

    def __init__(self, file: Path, text: str) -> None:
        self.file = file
        self.errors: list[DesignError] = []
        self._locations = Locations(text)

    def adopt(self, path: KeyPath, error: DesignError) -> None:
        """Add an error that a value at a key has caused.

        Parameters
        ----------
        path : tuple of str or int
            The key.
        error : DesignError
            What is wrong; its own file, line and key are not kept.
        """
        place = self._locations.find(path)
        self.errors.append(
            type(error)(
                error.message,
                file=self.file,
                line=None if place is None else place.line,
                column=None if place is None else place.column,
                key=dotted(path) or None,
                expected=error.expected,
                found=error.found,
                nearest=error.nearest,
            )
        )

    def unknown(self, path: KeyPath, known: Iterable[str], message: str = "unknown key") -> None:
        """Add an error about a key that is not known.

        Parameters
        ----------
        path : tuple of str or int
            The key.
        known : iterable of str
            Keys that are known at its place.
        message : str
            What is wrong.
        """
        names = tuple(known)
        name = str(path[-1])
        expected = f"one of {', '.join(names)}" if names else "no keys here"
        nearest = nearest_name(name, names)
        self.adopt(path, DesignError(message, expected=expected, found=shown(name), nearest=nearest))

    def missing(self, path: KeyPath, expected: str, what: str = "key") -> None:
        """Add an error about a key that is missing; its place is that of its table.

        Parameters
        ----------
        path : tuple of str or int
            The key.
        expected : str
            What its value would be.
        what : str
            "key" or "table".
        """
        self.adopt(path, DesignError(f"this required {what} is missing", expected=expected))

    def table(self, path: KeyPath, raw: object) -> dict[str, object] | None:
        """Return a value that should be a table.

        Parameters
        ----------
        path : tuple of str or int
            Its key.
        raw : object
            The value.

        Returns
        -------
        dict or None
            The table; None, with an error added, if the value is none.
        """
        if isinstance(raw, dict):
            return raw
        self.adopt(
            path, DesignError("a table is wanted here", expected=f"[{dotted(path)}]", found=shown(raw))
        )
        return None

    def value(self, path: KeyPath, raw: object, kind: Kind[V]) -> V | None:
        """Check one value.

        Parameters
        ----------
        path : tuple of str or int
            Its key.
        raw : object
            The value.
        kind : Kind
            What it should be.

        Returns
        -------
        object
            The value in the program's own form; None, with an error added, if it is wrong.
        """
        try:
            return kind.read(raw, from_file=True)
        except DesignError as exc:
            self.adopt(path, exc)
            return None

    def model(self, model: type[T], path: KeyPath, raw: Mapping[str, object]) -> T | None:
        """Check a table that has a model.

        Parameters
        ----------
        model : type of BaseModel
            The model.
        path : tuple of str
            Key of the table.
        raw : mapping
            The table.

        Returns
        -------
        BaseModel or None
            The model; None, with errors added, if something in the table is wrong.
        """
        try:
            return model.model_validate(raw, context=FROM_FILE)
        except ValidationError as exc:
            for detail in exc.errors(include_url=False):
                cause = detail.get("ctx", {}).get("error")
                self._explain(model, (*path, *detail["loc"]), detail["type"], cause)
            return None

    def _explain(self, model: type[BaseModel], path: KeyPath, kind: str, cause: object) -> None:
        """Add one of pydantic's errors in our own words."""
        if kind == "extra_forbidden":
            self.unknown(path, table_keys(model))
        elif kind == "missing":
            field = table_keys(model)[str(path[-1])]
            kinds = [entry.expected for entry in field.metadata if hasattr(entry, "expected")]
            self.missing(path, kinds[0] if kinds else str(field.description))
        elif isinstance(cause, ElementErrors):
            for index, error in cause.errors:
                self.adopt((*path, index), error)
        elif isinstance(cause, DesignError):
            self.adopt(path, cause)
        else:
            self.adopt(path, DesignError(f"the value cannot be used: {kind.replace('_', ' ')}"))

    def report(self) -> None:
        """Raise all errors together, in the order of the file.

        Raises
        ------
        InvalidDesign
            If there are any.
        """
        if self.errors:
            raise InvalidDesign(
                sorted(self.errors, key=lambda error: (error.line or 10**9, error.column or 0))
            )
