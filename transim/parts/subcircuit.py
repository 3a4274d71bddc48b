"""The SPICE text of a part file: one `.subckt`, and what may stand in it."""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path

from transim.errors import NetlistError
from transim.parts.cards import Card, joined_cards
from transim.parts.guard import check_card, check_lines

__all__ = ["Subcircuit", "read_subcircuit"]

_WORD = re.compile(r"[A-Za-z0-9_#]+")


@dataclass(frozen=True)
class Subcircuit:
    """The outer `.subckt` of a part file.

    Parameters
    ----------
    line : int
        Line of its first card.
    name : str
        Its name.
    nodes : tuple of str
        Its terminals, in order.
    defaults : dict of str to str
        Its parameters and their default texts.
    cards : tuple of Card
        Cards between `.subckt` and `.ends`, nested subcircuits included.
    outer : tuple of Card
        Those that are not inside a nested subcircuit.
    """

    line: int
    name: str
    nodes: tuple[str, ...]
    defaults: dict[str, str]
    cards: tuple[Card, ...]
    outer: tuple[Card, ...]

    @property
    def elements(self) -> set[str]:
        """Names of the elements outside nested subcircuits, in lower case."""
        return {card.text.split()[0].lower() for card in self.outer if not card.text.startswith(".")}

    def calls(self) -> list[tuple[Card, str, int]]:
        """Return the X cards: the card, the subcircuit it calls (lower case) and how many nodes it has."""
        found = []
        for card in self.cards:
            if card.text[0] in "xX":
                names = _positional(card.text)
                found.append((card, names[-1].lower(), len(names) - 2))
        return found

    def nested(self) -> set[str]:
        """Return the names of the nested subcircuits, in lower case."""
        return {
            card.text.split()[1].lower()
            for card in self.cards
            if card.text.lower().startswith(".subckt") and len(card.text.split()) > 1
        }

    def words(self, *, without_model: str | None = None) -> set[str]:
        """Return all the names that stand in the cards, in lower case.

        Parameters
        ----------
        without_model : str or None
            Name of a `.model` card that is left out.

        Returns
        -------
        set of str
            Nodes, elements, parameters, functions and numbers.
        """
        words: set[str] = set()
        for card in self.cards:
            tokens = card.text.lower().split()
            if without_model is not None and tokens[0] == ".model" and tokens[1:2] == [without_model.lower()]:
                continue
            words.update(word.lower() for word in _WORD.findall(card.text))
        return words


def _positional(text: str) -> list[str]:
    """Return the tokens of a card before its first `name=value`."""
    tokens = re.sub(r"\s*=\s*", "=", text).split()
    names = []
    for token in tokens:
        if "=" in token:
            break
        if token.lower() != "params:":
            names.append(token)
    return names


def _defaults(card: Card, file: Path) -> dict[str, str]:
    """Return the `name=value` pairs of a `.subckt` card."""
    tokens = re.sub(r"\s*=\s*", "=", card.text).split()[len(_positional(card.text)) :]
    defaults: dict[str, str] = {}
    for token in tokens:
        if token.lower() == "params:":
            continue
        name, sign, value = token.partition("=")
        if not sign or not name or not value:
            raise NetlistError(f'"{token}" in the .subckt card is not name=value', file=file, line=card.line)
        if name in defaults:
            raise NetlistError(f"the .subckt card names {name} twice", file=file, line=card.line)
        defaults[name] = value
    return defaults


def read_subcircuit(body: str, *, file: Path, first_line: int) -> Subcircuit:
    """Read the one `.subckt` of a part file.

    Parameters
    ----------
    body : str
        SPICE text after the header.
    file : Path
        The part file, for errors.
    first_line : int
        Line of the file at which `body` starts.

    Returns
    -------
    Subcircuit
        Its name, terminals, parameters and cards.

    Raises
    ------
    NetlistError
        If there is no `.subckt`, more than one side by side, a card outside it, a missing `.ends`, or a
        card that runs, reads or writes something instead of describing the circuit.
    """
    head: Card | None = None
    depth = 0
    cards: list[Card] = []
    outer: list[Card] = []
    check_lines(body.split("\n"), file=file, first_line=first_line)
    for card in joined_cards(body, file=file, first_line=first_line):
        keyword = card.text.split()[0].lower()
        check_card(card.text, file=file, line=card.line)
        if depth == 0:
            if keyword != ".subckt" or head is not None:
                raise NetlistError(
                    f'a part file holds one .subckt and nothing outside it, found "{card.text[:40]}"',
                    file=file,
                    line=card.line,
                )
            head, depth = card, 1
            continue
        depth += {".subckt": 1, ".ends": -1}.get(keyword, 0)
        if depth:
            cards.append(card)
            if depth == 1 and keyword != ".ends":
                outer.append(card)
    if head is None:
        raise NetlistError("the part file has no .subckt", file=file)
    if depth:
        raise NetlistError("the .subckt has no .ends", file=file, line=head.line)
    names = _positional(head.text)
    if len(names) < 2:
        raise NetlistError("the .subckt card has no name", file=file, line=head.line)
    return Subcircuit(
        head.line, names[1], tuple(names[2:]), _defaults(head, file), tuple(cards), tuple(outer)
    )
