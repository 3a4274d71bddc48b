"""Diodes and transistors of a plain netlist made junctions, so that their charge, current and voltage can be seen."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

from transim.parts.cards import Card
from transim.parts.nodes import GROUND, model_place, nodes_of
from transim.parts.part import Part, Probe, Slot
from transim.parts.scope import Scope

__all__ = ["FoundJunction", "replace_devices"]

_REVERSE = {("a", "k"): (("k", "a"),), ("c", "b", "e"): (("e", "b"), ("c", "b"))}


@dataclass(frozen=True)
class FoundJunction:
    """A diode or transistor of a netlist.

    Attributes
    ----------
    name : str
        Of the device, those of the subcircuits around it before it, joined by ``_``.
    slot : Slot
        The subcircuit that is called in its place.
    part : Part
        The device with its model, as a part without parameters.
    card : str or None
        The model card of a PNP transistor, whose voltages and currents count the other way; else None.
    """

    name: str
    slot: Slot
    part: Part
    card: str | None


def replace_devices(scope: Scope, file: Path) -> list[FoundJunction]:
    """Put the call of a slot in the place of each diode and transistor, in a scope and the subcircuits in it.

    Parameters
    ----------
    scope : Scope
        Its cards are replaced.
    file : Path
        Where they come from.

    Returns
    -------
    list of FoundJunction
        A device stays where it is, and is no junction, if it depends on parameters of the subcircuit around it or
        on conditions, has its substrate connected, or is a transistor of a kind without two junctions.
    """
    found: list[FoundJunction] = []
    for place, card in enumerate(scope.cards):
        junction = _junction(scope, card, file) if card.text[0] in "dDqQ" else None
        if junction is not None:
            found.append(junction)
            nodes = " ".join(card.text.split()[1 : 1 + len(junction.slot.terminals)])
            scope.cards[place] = Card(card.line, f"X{card.text.split()[0]} {nodes} {junction.slot.name}")
    for inner in scope.subcircuits.values():
        found += replace_devices(inner, file)
    return found


def _outward(scope: Scope) -> Iterator[Scope]:
    here: Scope | None = scope
    while here is not None:
        yield here
        here = here.outer


def _junction(scope: Scope, card: Card, file: Path) -> FoundJunction | None:
    words, models = card.text.split(), scope.models
    letter = words[0][0].lower()
    terminals = ("a", "k") if letter == "d" else ("c", "b", "e")
    place = 3 if letter == "d" else model_place(card.text.lower().split(), frozenset(models))
    model = models.get(words[place].lower()) if len(words) > place else None
    substrate = [node for node in nodes_of(card.text, frozenset(models))[3:] if node not in GROUND]
    if model is None or substrate or not all(outer.plain for outer in _outward(scope)):
        return None
    kind = model.text.replace("(", " ").split()[2].lower()
    if kind not in ("d", "npn", "pnp"):
        return None
    device = words[0].lower()
    name = "_".join([*(outer.name for outer in reversed(list(_outward(scope))) if outer.name), device])
    name = re.sub(r"\W", "_", name)
    part_name = f"own_{name}"
    needed = [*scope.cards_seen(".param"), *scope.cards_seen(".func"), model]
    inner = [words[0], *terminals, *words[1 + len(terminals) :]]
    body = "\n".join(
        [f".subckt {part_name} {' '.join(terminals)}", *(c.text for c in needed), " ".join(inner), f".ends {part_name}"]
    )
    part = Part(
        name=part_name,
        role="junction",
        file=file,
        terminals=terminals,
        summary=f"{words[0]} of {file.name}",
        sources=(),
        notes=(),
        parameters=(),
        supplies=(),
        ports=(),
        bias=(),
        throws=(),
        inverted=(),
        slots=(),
        probes=_probes(device, terminals),
        model=None,
        reserved=(),
        body=f"{body}\n",
    )
    slot = Slot(f"place_{name}", terminals, f"{words[0]} in line {card.line}")
    return FoundJunction(name, slot, part, model.text if kind == "pnp" else None)


def _probes(device: str, terminals: tuple[str, ...]) -> tuple[Probe, ...]:
    """Return charge and conduction as ngspice has them in the device, and the reverse voltages."""
    charges, current = (("charge",), "id") if device[0] == "d" else (("qbe", "qbc"), "ib")
    return (
        Probe("charge", "C", tuple((1.0, f"@{device}[{name}]") for name in charges)),
        Probe("current", "A", ((1.0, f"@{device}[{current}]"),)),
        *(Probe("reverse", "V", ((1.0, f"v({plus})"), (-1.0, f"v({minus})"))) for plus, minus in _REVERSE[terminals]),
    )
