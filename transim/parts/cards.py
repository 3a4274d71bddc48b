"""SPICE cards of a text: continuation lines joined, comments removed; published `.model` cards."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from transim.errors import NetlistError
from transim.parts.guard import check_lines

__all__ = ["Card", "joined_cards", "read_model_card", "read_model_cards", "read_netlist_text"]

_INLINE_COMMENT = re.compile(r";|(?:^|\s)\$(?=\s|$)")
_MODEL = re.compile(r"\.model\s+(?P<name>[^\s(]+)\s+(?P<kind>[a-z]\w*)\s*(?P<rest>.*)", re.IGNORECASE)
_PARAMETER = re.compile(
    r"""[\s,]*[a-z_][\w.]*\s*=\s*(?:[^\s=(){},'"`]+|\{[^{}=]*\}|'[^'=]*')(?=[\s,]|$)""", re.IGNORECASE
)
_LARGEST_FILE = 2_000_000


@dataclass(frozen=True)
class Card:
    """One SPICE card.

    Parameters
    ----------
    line : int
        Its first line, counted from 1.
    text : str
        The card without comments, continuation lines joined by a space.
    """

    line: int
    text: str


def read_netlist_text(path: Path) -> str:
    """Read the text of a SPICE file.

    Parameters
    ----------
    path : Path
        The file; UTF-8.

    Returns
    -------
    str
        Its text, with lines ended by a line feed.

    Raises
    ------
    NetlistError
        If it does not exist, is no ordinary file, is larger than 2 MB, or is not UTF-8 text.
    """
    try:
        if not path.exists():
            raise NetlistError("the file does not exist", file=path)
        if not path.is_file():
            raise NetlistError("a SPICE file is wanted, this is a folder or a device", file=path)
        if path.stat().st_size > _LARGEST_FILE:
            raise NetlistError("the file is larger than 2 MB", file=path)
        text = path.read_text(encoding="utf-8-sig")
    except OSError as exc:
        raise NetlistError(f"the file cannot be read: {exc.strerror}", file=path) from exc
    except UnicodeDecodeError as exc:
        line = exc.object[: exc.start].count(b"\n") + 1
        raise NetlistError("the file is not UTF-8 text", file=path, line=line) from exc
    for number, line_text in enumerate(text.split("\n"), start=1):
        if any(ord(character) < 32 and character != "\t" for character in line_text):
            raise NetlistError("there is a control character in this line", file=path, line=number)
    return text


def joined_cards(text: str, *, file: Path, first_line: int = 1) -> Iterator[Card]:
    """Go through the cards of a SPICE text.

    Parameters
    ----------
    text : str
        SPICE text.
    file : Path
        Where it comes from, for errors.
    first_line : int
        Line of the file at which the text starts.

    Yields
    ------
    Card
        Each card; comments and empty lines are left out.

    Raises
    ------
    NetlistError
        If the first card is a continuation line.
    """
    start, pieces = 0, list[str]()
    for number, line in enumerate(text.split("\n"), start=first_line):
        if line.lstrip().startswith("*"):
            continue
        content = _INLINE_COMMENT.split(line, maxsplit=1)[0].strip()
        if not content:
            continue
        if not content.startswith("+"):
            if pieces:
                yield Card(start, " ".join(pieces))
            start, pieces = number, [content]
        elif pieces:
            pieces.append(content[1:].strip())
        else:
            raise NetlistError("a continuation line has no card before it", file=file, line=number)
    if pieces:
        yield Card(start, " ".join(pieces))


def read_model_card(path: Path, name: str, kinds: Sequence[str]) -> str:
    """Read the single `.model` card of a file and give it another name.

    Parameters
    ----------
    path : Path
        File that holds one `.model` card and comments, nothing else.
    name : str
        Name that the card gets.
    kinds : sequence of str
        Device kinds that are permitted, for example ``("NPN", "PNP")``.

    Returns
    -------
    str
        The card on one line, for example ``.model junction D(is=1e-14 tt=1e-08)``.

    Raises
    ------
    NetlistError
        If there is no card or more than one, another kind, any other content, or unbalanced parentheses.
    """
    return read_model_cards(path, {name: kinds})


def read_model_cards(path: Path, places: Mapping[str, Sequence[str]]) -> str:
    """Read the `.model` cards of a file, at most one for each place, and give each the name of its place.

    Parameters
    ----------
    path : Path
        File that holds `.model` cards and comments, nothing else.
    places : mapping of str to sequence of str
        Name that a card gets, and the device kinds that it may be of; no kind has two places.

    Returns
    -------
    str
        The cards, one a line.

    Raises
    ------
    NetlistError
        If there is no card or more than one for a place, another kind, any other content, or unbalanced
        parentheses.
    """
    permitted = " or ".join(kind for kinds in places.values() for kind in kinds)
    found: dict[str, list[tuple[Card, re.Match[str]]]] = {name: [] for name in places}
    text = read_netlist_text(path)
    check_lines(text.split("\n"), file=path)
    for card in joined_cards(text, file=path):
        match = _MODEL.fullmatch(card.text)
        if match is None:
            raise NetlistError(
                f'only one .model card and comments may stand here, found "{card.text[:40]}"'
                if len(places) == 1
                else f'only .model cards and comments may stand here, found "{card.text[:40]}"',
                file=path,
                line=card.line,
            )
        kind = match["kind"].upper()
        place = next((name for name, kinds in places.items() if kind in {k.upper() for k in kinds}), None)
        if place is None:
            raise NetlistError(
                f"the card {match['name']} is of kind {match['kind']}, {permitted} is wanted", file=path, line=card.line
            )
        found[place].append((card, match))
    if not any(found.values()):
        raise NetlistError(f"the file holds no .model card; one of kind {permitted} is wanted", file=path)
    for cards in found.values():
        if len(cards) > 1:
            names = ", ".join(f"{match['name']} (line {card.line})" for card, match in cards)
            raise NetlistError(
                f"the file holds {len(cards)} .model cards: {names}; keep the one that is meant",
                file=path,
                line=cards[1][0].line,
            )
    return "\n".join(
        f".model {name} {match['kind']}({_model_parameters(match['rest'], path, card.line)})"
        for name, cards in found.items()
        for card, match in cards
    )


def _model_parameters(rest: str, path: Path, line: int) -> str:
    """Return the `key=value` list of a card without its outer parentheses."""
    inner = rest.strip()
    if inner.startswith("(") and inner.endswith(")"):
        inner = inner[1:-1].strip()
    end = 0
    while match := _PARAMETER.match(inner, end):
        end = match.end()
    if inner[end:].strip(" \t,"):
        raise NetlistError(
            "the parameters of the .model card are not a list of name=value, between ( and ) or without them",
            file=path,
            line=line,
        )
    return inner
