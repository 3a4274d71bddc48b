"""Command `parts`: the part files, and what one of them takes."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

from transim.commands.console import Console
from transim.errors import DesignError
from transim.parts.catalogue import load_catalogue
from transim.parts.nearest import nearest_name
from transim.parts.part import ROLES, Parameter, Part
from transim.quantities import format_quantity
from transim.report.document import FORMAT, part_document
from transim.report.layout import Column, align, wrap
from transim.report.throws import throw_sentences

__all__ = ["show_parts"]


def show_parts(console: Console, name: str | None, folder: Path | None) -> int:
    """List all parts, or describe those of one name.

    Parameters
    ----------
    console : Console
        Where to write.
    name : str or None
        A part's name.
    folder : Path or None
        The user's own part files, beside the shipped ones.

    Returns
    -------
    int
        Exit status.

    Raises
    ------
    DesignError
        If there is no part of this name.
    NetlistError
        If a part file cannot be used.
    """
    catalogue = load_catalogue(folder)
    if name is None:
        parts = list(catalogue)
        console.write(_list(parts))
    else:
        parts = [catalogue.find(role, name) for role in ROLES if name in catalogue.names(role)]
        if not parts:
            known = [known for role in ROLES for known in catalogue.names(role)]
            raise DesignError(
                f"there is no part named {name}",
                expected=f"one of {', '.join(known)}",
                nearest=nearest_name(name, known),
            )
        for part in parts:
            console.write(_describe(part))
    console.document({"format": FORMAT, "parts": [part_document(part) for part in parts]})
    return 0


def _list(parts: list[Part]) -> Iterator[str]:
    width = max(len(part.name) for part in parts)
    for role, title in ROLES.items():
        yield title
        for part in parts:
            if part.role == role:
                yield from wrap(f"{part.name.ljust(width)}  {part.summary}", "  ", " " * (width + 2))
        yield ""
    yield "transim parts NAME describes one of them with all its parameters."


def _describe(part: Part) -> Iterator[str]:
    yield from wrap(f"{part.name}, a {part.role}: {part.summary}")
    yield f"  file: {part.file}"
    yield f"  terminals: {' '.join(part.terminals)}"
    if part.role == "path":
        yield f"  RF ports: {' '.join(part.ports)}"
        for sentence in throw_sentences(part):
            yield from wrap(sentence, "  ")
    for slot in part.slots:
        yield from wrap(f"slot {slot.name} ({' '.join(slot.terminals)}): {slot.meaning}", "  ")
    if part.model is not None:
        kinds = " and one of kind ".join(" or ".join(place.kinds) for place in part.model.places)
        silenced = ", ".join(part.model.parameters)
        text = f"model: file with one published .model card of kind {kinds}"
        yield from wrap(f"{text}; it takes the place of {silenced}" if silenced else text, "  ")
    for title, parameters in (("supplies", part.supplies), ("parameters", part.parameters)):
        if parameters:
            yield ""
            yield from _table(title, parameters)
    for title, texts in (("notes", part.notes), ("sources", part.sources)):
        if texts:
            yield ""
            yield f"  {title}"
            for text in texts:
                yield from wrap(text, "    ")


def _table(title: str, parameters: tuple[Parameter, ...]) -> Iterator[str]:
    columns = (
        Column(title, tuple(parameter.name for parameter in parameters)),
        Column("default", tuple(format_quantity(p.default, p.unit, 12) for p in parameters), right=True),
        Column("range", tuple(parameter.range for parameter in parameters)),
    )
    meanings = [parameter.meaning for parameter in parameters]
    lines = align(columns, "  ")
    width = sum(column.width + 2 for column in columns)
    yield f"{lines[0].ljust(width)}  meaning"
    for line, meaning in zip(lines[1:], meanings, strict=True):
        yield from wrap(f"{line.strip().ljust(width - 2)}  {meaning}", "  ", " " * width)
