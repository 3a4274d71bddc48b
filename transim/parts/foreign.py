"""A published `.subckt` without a header, made a junction."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from transim.errors import NetlistError
from transim.parts.cards import Card, joined_cards, read_netlist_text
from transim.parts.guard import check_card, check_lines
from transim.parts.nearest import nearest_name
from transim.parts.part import Part, Probe

__all__ = ["read_foreign_junction"]

#: Reverse voltage of each junction, by the terminals.
_REVERSE = {("a", "k"): (("k", "a"),), ("c", "b", "e"): (("e", "b"), ("c", "b"))}


def read_foreign_junction(path: Path, name: str, terminals: Sequence[str], part_name: str) -> Part:
    """Make a junction of a subcircuit in a file that holds only subcircuits and models.

    Parameters
    ----------
    path : Path
        The file.
    name : str
        The subcircuit that is meant.
    terminals : sequence of str
        What each node of its `.subckt` card is, in its order: a and k, or c, b and e.
    part_name : str
        Name of the part; it becomes the name of the outer subcircuit.

    Returns
    -------
    Part
        Without parameters and without a probe of its charge, which only its author knows.

    Raises
    ------
    NetlistError
        If the file holds anything that is no circuit, has no such subcircuit, or its nodes are not as many as
        the terminals.
    """
    order = next((known for known in _REVERSE if sorted(known) == sorted(terminals)), None)
    if order is None:
        raise NetlistError(
            f"the terminals of a junction are a and k, or c, b and e, found {' '.join(terminals)}", file=path
        )
    cards = _cards(path)
    nodes = _nodes(cards, name, path)
    if nodes != len(terminals):
        raise NetlistError(
            f"the subcircuit {name} has {nodes} nodes, and {len(terminals)} terminals are given", file=path
        )
    text = "\n".join(card.text for card in cards)
    body = f".subckt {part_name} {' '.join(order)}\nX1 {' '.join(terminals)} {name}\n{text}\n.ends {part_name}\n"
    return Part(
        name=part_name,
        role="junction",
        file=path,
        terminals=order,
        summary=f"the subcircuit {name} of {path.name}",
        sources=(),
        notes=(),
        parameters=(),
        supplies=(),
        ports=(),
        bias=(),
        throws=(),
        inverted=(),
        slots=(),
        probes=tuple(
            Probe("reverse", "V", ((1.0, f"v({plus})"), (-1.0, f"v({minus})"))) for plus, minus in _REVERSE[order]
        ),
        model=None,
        reserved=(),
        body=body,
    )


def _cards(path: Path) -> list[Card]:
    """Return the cards of the file, each of which describes a circuit and stands in a subcircuit or is a model."""
    text = read_netlist_text(path)
    check_lines(text.split("\n"), file=path)
    depth = 0
    cards = list(joined_cards(text, file=path))
    for card in cards:
        check_card(card.text, file=path, line=card.line)
        keyword = card.text.split()[0].lower()
        depth += {".subckt": 1, ".ends": -1}.get(keyword, 0)
        if depth < 0:
            raise NetlistError("this .ends ends no .subckt", file=path, line=card.line)
        if depth == 0 and not keyword.startswith("."):
            raise NetlistError(
                f'outside its subcircuits the file may only have models and parameters, found "{card.text[:40]}"',
                file=path,
                line=card.line,
            )
    if depth:
        raise NetlistError("a .subckt has no .ends", file=path)
    return cards


def _nodes(cards: Sequence[Card], name: str, path: Path) -> int:
    """Return how many nodes the `.subckt` card of a name has."""
    heads = [card.text.split() for card in cards if card.text.lower().startswith(".subckt")]
    for head in heads:
        if head[1].lower() == name.lower():
            nodes = head[2:]
            ends = [k for k, word in enumerate(nodes) if "=" in word or word.lower() == "params:"]
            stop = ends[0] if ends else len(nodes)
            # a blank before "=" leaves the parameter's name behind as a word of its own
            return stop - 1 if ends and nodes[stop].startswith("=") else stop
    known = [head[1] for head in heads]
    nearest = nearest_name(name, known)
    hint = f"did you mean {nearest}?" if nearest else f"it has {', '.join(known) or 'none'}"
    raise NetlistError(f"the file has no subcircuit {name}; {hint}", file=path)
