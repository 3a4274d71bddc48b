"""Subcircuits of a netlist by place: what is called from where, and which models are seen there."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from transim.errors import NetlistError
from transim.parts.cards import Card, joined_cards
from transim.parts.nodes import GROUND, nodes_of

__all__ = ["Call", "Scope", "calls_of", "check_names", "scope_of"]

_DEEPEST = 20


@dataclass
class Scope:
    """The cards between a `.subckt` and its `.ends`, or those of a whole file.

    Parameters
    ----------
    name : str
        Of the subcircuit in lower case; empty for a file.
    nodes : tuple of str
        Its terminals in lower case.
    line : int
        Line of its first card.
    outer : Scope or None
        Where it stands.
    plain : bool
        Whether it has neither parameters nor conditions of its own.
    head : str
        Its `.subckt` card.
    cards : list of Card
        Its own cards, without those of subcircuits in it.
    subcircuits : dict of str to Scope
        Those in it, by name in lower case.
    """

    name: str
    nodes: tuple[str, ...]
    line: int
    outer: Scope | None
    plain: bool = True
    head: str = ""
    cards: list[Card] = field(default_factory=list)
    subcircuits: dict[str, Scope] = field(default_factory=dict)

    def all(self) -> Iterator[Scope]:
        """Go through the scope and all those in it."""
        yield self
        for inner in self.subcircuits.values():
            yield from inner.all()

    def find(self, name: str) -> Scope | None:
        """Return the subcircuit that a name means here, None where there is none."""
        if name in self.subcircuits:
            return self.subcircuits[name]
        return None if self.outer is None else self.outer.find(name)

    def cards_seen(self, keyword: str) -> list[Card]:
        """Return the dot cards of a kind that hold here, those of the outermost scope first."""
        own = [card for card in self.cards if card.text.split()[0].lower() == keyword]
        return own if self.outer is None else self.outer.cards_seen(keyword) + own

    @property
    def models(self) -> dict[str, Card]:
        """The `.model` cards that hold here, by name in lower case; an inner one hides an outer one."""
        return {card.text.replace("(", " ").split()[1].lower(): card for card in self.cards_seen(".model")}

    @property
    def elements(self) -> list[Card]:
        """Its cards that are no dot cards."""
        return [card for card in self.cards if not card.text.startswith(".")]

    @property
    def connected(self) -> frozenset[str]:
        """Every node that an element of it touches, in lower case, without ground."""
        names = frozenset(self.models)
        return frozenset(node for card in self.elements for node in nodes_of(card.text, names)) - frozenset(GROUND)


def check_names(top: Scope, file: Path) -> None:
    """Refuse calls of subcircuits, and devices with models, that the file does not have.

    Parameters
    ----------
    top : Scope
        The file.
    file : Path
        For errors.

    Raises
    ------
    NetlistError
        With the line, at the first of them.
    """
    for scope in top.all():
        # a model for a range of sizes has a number behind its name
        models = {name.partition(".")[0] for name in scope.models} | set(scope.models)
        for card in scope.elements:
            words = card.text.lower().split()
            letter, missing = words[0][0], None
            if letter == "x" and scope.find(_called(card.text)) is None:
                missing = f"calls {_called(card.text)}, which is no subcircuit of the file"
            elif letter in "dqmjzsw" and not models.intersection(words[3:]):
                missing = f"has no model of the file; it has {', '.join(sorted(scope.models)[:20]) or 'none'}"
            if missing is not None:
                raise NetlistError(f"{card.text.split()[0]} {missing}", file=file, line=card.line)


@dataclass(frozen=True)
class Call:
    """An X card somewhere in a subcircuit, as it appears after flattening.

    Attributes
    ----------
    instance : str
        Names of the X cards on the way, joined by points, for example ``x1.xd3``.
    name : str
        What the last of them calls.
    nodes : tuple of str
        Its nodes: terminals of the outermost subcircuit, ``0``, or inner nodes with the instances before them.
    """

    instance: str
    name: str
    nodes: tuple[str, ...]


def scope_of(cards: Sequence[Card], file: Path) -> Scope:
    """Sort cards into their subcircuits.

    Parameters
    ----------
    cards : sequence of Card
        Of a file, in its order.
    file : Path
        For errors.

    Returns
    -------
    Scope
        The file.

    Raises
    ------
    NetlistError
        If `.subckt` and `.ends` do not match, or a subcircuit stands twice or has no name.
    """
    top = here = Scope("", (), 1, None)
    for card in cards:
        words = card.text.lower().replace(" =", "=").replace("= ", "=").split()
        if words[0] == ".subckt":
            if len(words) < 2:
                raise NetlistError("the .subckt card has no name", file=file, line=card.line)
            nodes = [word for word in words[2:] if "=" not in word and word != "params:"]
            inner = Scope(words[1], tuple(nodes), card.line, here, plain=len(nodes) == len(words) - 2, head=card.text)
            if words[1] in here.subcircuits:
                raise NetlistError(f"the subcircuit {words[1]} stands twice", file=file, line=card.line)
            here.subcircuits[words[1]] = inner
            here = inner
        elif words[0] == ".ends":
            if here.outer is None:
                raise NetlistError("this .ends ends no .subckt", file=file, line=card.line)
            here = here.outer
        else:
            here.plain = here.plain and not words[0].startswith((".if", ".else"))
            here.cards.append(card)
    if here.outer is not None:
        raise NetlistError("the .subckt has no .ends", file=file, line=here.line)
    return top


def calls_of(body: str, file: Path, wanted: Mapping[str, object]) -> tuple[Call, ...]:
    """Find the calls of some subcircuits in a part, also those in subcircuits of its own.

    Parameters
    ----------
    body : str
        SPICE text of one `.subckt`.
    file : Path
        For errors.
    wanted : mapping with str keys
        Names in lower case.

    Returns
    -------
    tuple of Call
        In the order of the text, as flattening meets them.
    """
    top = scope_of(tuple(joined_cards(body, file=file)), file)
    outer = next(iter(top.subcircuits.values()))
    return tuple(_calls(outer, "", {node: node for node in outer.nodes}, wanted, 0))


def _calls(
    scope: Scope, prefix: str, wires: Mapping[str, str], wanted: Mapping[str, object], depth: int
) -> Iterator[Call]:
    for card in scope.elements:
        if card.text[0].lower() != "x" or depth > _DEEPEST:
            continue
        instance = f"{prefix}{card.text.split()[0].lower()}"
        nodes = tuple("0" if n in GROUND else wires.get(n, f"{prefix}{n}") for n in nodes_of(card.text))
        name = _called(card.text)
        inner = scope.find(name)
        if inner is not None:
            yield from _calls(inner, f"{instance}.", dict(zip(inner.nodes, nodes, strict=False)), wanted, depth + 1)
        elif name in wanted:
            yield Call(instance, name, nodes)


def _called(text: str) -> str:
    """Return the name of the subcircuit that an X card calls."""
    words = []
    for word in text.lower().replace(" =", "=").replace("= ", "=").split():
        if "=" in word or word == "params:":
            break
        words.append(word)
    return words[-1]
