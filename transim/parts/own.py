"""A user's own circuit without a header, made a path or a driver: the design file names its nodes instead."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from transim.errors import NetlistError
from transim.parts.devices import FoundJunction, replace_devices
from transim.parts.nearest import nearest_name
from transim.parts.nodes import GROUND, nodes_of
from transim.parts.part import Parameter, Part, Throw
from transim.parts.plain import PlainFile, read_plain
from transim.parts.scope import Scope, check_names, scope_of

__all__ = ["OWN_PATH", "OwnDriver", "OwnPath", "read_own_driver", "read_own_path"]

#: Name of the part that a path without a header becomes.
OWN_PATH = "own_path"
_SAFE = re.compile(r"[a-z][a-z0-9_]*")
#: Nodes and variables that every deck has.
_TAKEN = re.compile(r"drive\d*|ctl\w*|out|mirror|time|temper|hertz|pi|e")


@dataclass(frozen=True)
class OwnPath:
    """How a design file names the nodes of an own path.

    Attributes
    ----------
    ports, bias : tuple of str
        Its RF ports and bias entries, by node.
    through : tuple of str
        The two ports whose transmission is judged.
    passes_high : bool
        True if RF passes while the command is high.
    inverted : tuple of str
        Bias entries whose driver gets the inverted command.
    ground : tuple of str
        Nodes that are connected to ground, beside 0.
    subcircuit : str or None
        The subcircuit that is the path; None: all of the file.
    """

    ports: tuple[str, ...]
    bias: tuple[str, ...]
    through: tuple[str, str]
    passes_high: bool
    inverted: tuple[str, ...] = ()
    ground: tuple[str, ...] = ()
    subcircuit: str | None = None


@dataclass(frozen=True)
class OwnDriver:
    """How a design file names the nodes of an own driver.

    Attributes
    ----------
    control, output : str
        Node of the command, node that feeds the bias entry.
    supplies : mapping of str to float
        Voltage of each node that a DC source of the program holds [V].
    ground : tuple of str
        Nodes that are connected to ground, beside 0.
    subcircuit : str or None
        The subcircuit that is the driver; None: all of the file.
    """

    control: str
    output: str
    supplies: Mapping[str, float]
    ground: tuple[str, ...] = ()
    subcircuit: str | None = None


class _Wrapped:
    """The circuit of a file inside a subcircuit whose terminals have names that a deck can bear."""

    def __init__(self, name: str, file: Path, subcircuit: str | None, roles: Mapping[str, str]) -> None:
        self.name = name
        self.plain: PlainFile = read_plain(file)
        self.roles = {node.lower(): role for node, role in roles.items()}
        self._top = scope_of(self.plain.cards, file)
        check_names(self._top, file)
        self._inner = self._chosen(subcircuit)
        self._check_nodes()
        self.terminals = self._terminals(roles)
        self._counted = Counter(card.text[0].upper() for scope in self._top.all() for card in scope.elements)
        self._looked_into = False

    def _fail(self, message: str, line: int | None = None) -> NetlistError:
        return NetlistError(message, file=self.plain.file, line=line)

    def _chosen(self, subcircuit: str | None) -> Scope:
        """Return the scope that is the circuit."""
        names = ", ".join(self._top.subcircuits)
        elements = self._top.elements
        if subcircuit is None:
            if not elements:
                raise self._fail(f"all of the circuit is in subcircuits; name one by the key subcircuit: {names}")
            return self._top
        inner = self._top.subcircuits.get(subcircuit.lower())
        if inner is None:
            nearest = nearest_name(subcircuit.lower(), self._top.subcircuits)
            hint = f"did you mean {nearest}?" if nearest else f"it has {names or 'none'}"
            raise self._fail(f"the file has no subcircuit {subcircuit}; {hint}")
        if elements:
            raise self._fail(
                f'beside the subcircuit {subcircuit} the file may only have models and parameters, '
                f'found "{elements[0].text[:40]}"',
                elements[0].line,
            )
        return inner

    def _check_nodes(self) -> None:
        """Look for the named nodes, and for sources that hold them."""
        inner = self._inner
        known = inner.connected | set(inner.nodes)
        if inner.nodes:
            for node in inner.nodes:
                if node not in self.roles:
                    raise self._fail(
                        f"the subcircuit {inner.name} has a terminal {node} that the design does not name; it can be "
                        "listed under ground",
                        inner.line,
                    )
        for node, role in self.roles.items():
            if node not in (set(inner.nodes) or known):
                what = f"subcircuit {inner.name} has no terminal" if inner.nodes else "file has no node"
                nearest = nearest_name(node, sorted(known))
                hint = f"did you mean {nearest}?" if nearest else f"it has {', '.join(sorted(known)[:20])}"
                raise self._fail(f"the {what} {node}, which is named as {role}; {hint}")
        for card in inner.elements:
            if card.text[0].lower() != "v":
                continue
            held = [node for node in nodes_of(card.text) if node in self.roles]
            if held and any(node in GROUND for node in nodes_of(card.text)):
                raise self._fail(
                    f"{card.text.split()[0]} holds the node {held[0]}, which is named as {self.roles[held[0]]} and "
                    "gets its source from the program; remove it",
                    card.line,
                )

    def _terminals(self, roles: Mapping[str, str]) -> dict[str, str]:
        """Return the name outside of each named node but those on ground; the node's own where a deck can bear it."""
        found: dict[str, str] = {}
        for node, role in roles.items():
            if role == "ground":
                continue
            name = {"control": "ctl", "output": "out"}.get(role, node.lower())
            if role not in ("control", "output") and (not _SAFE.fullmatch(name) or _TAKEN.fullmatch(name)):
                name = f"node_{re.sub(r'[^a-z0-9_]', '_', name)}"
            while name in found.values() or any(name in (f"e{n}", n[1:] * (n[0] == "e")) for n in found.values()):
                name += "_"
            found[node.lower()] = name
        return found

    def junctions(self) -> list[FoundJunction]:
        """Put slots in the place of diodes and transistors."""
        self._looked_into = True
        return replace_devices(self._top, self.plain.file)

    def contents(self) -> str:
        """Say how many elements of each kind the file has, subcircuits counted once."""
        return ", ".join(f"{many} {letter}" for letter, many in sorted(self._counted.items()))

    def unseen(self) -> list[str]:
        """Say which diodes and transistors are no junctions that can be looked into."""
        cards = [card for scope in self._top.all() for card in scope.elements if card.text[0] in "dDqQ"]
        return [
            f"{card.text.split()[0]} in line {card.line} works but is not looked into as a junction: it depends on "
            "parameters or conditions around it, or has its substrate connected"
            for card in cards
            if self._looked_into
        ]

    def body(self) -> str:
        """Return the SPICE text."""
        inner = self._inner
        order = list(inner.nodes) or list(self.roles)
        wires = " ".join(self.terminals.get(node, "0") for node in order)
        name = inner.name if inner.nodes or inner is not self._top else f"{self.name}_circuit"
        lines = [f".subckt {self.name} {' '.join(self.terminals.values())}", f"X1 {wires} {name}"]
        if inner is self._top:
            lines += [f".subckt {name} {' '.join(order)}", *_text(inner), f".ends {name}"]
        else:
            lines += _text(self._top)
        return "\n".join([*lines, f".ends {self.name}"]) + "\n"


def _text(scope: Scope) -> list[str]:
    """Return the cards of a scope, those of the subcircuits in it last."""
    lines = [card.text for card in scope.cards]
    for inner in scope.subcircuits.values():
        lines += [inner.head, *_text(inner), f".ends {inner.name}"]
    return lines


def _roles(groups: Iterable[tuple[str, Sequence[str]]], file: Path) -> dict[str, str]:
    """Return what each named node is; refuse one that is two things, or ground."""
    found: dict[str, str] = {}
    for role, nodes in groups:
        for node in nodes:
            if node.lower() in GROUND:
                raise NetlistError(f"the node {node} is ground and cannot be named as {role}", file=file)
            if node.lower() in found:
                was = found[node.lower()]
                again = "twice" if was == role else f"as {was} and as {role}"
                raise NetlistError(f"the node {node} is named {again}", file=file)
            found[node.lower()] = role
    return found


def read_own_path(file: Path, named: OwnPath, name: str) -> tuple[Part, list[FoundJunction]]:
    """Make a path of a SPICE file without a header.

    Parameters
    ----------
    file : Path
        The file.
    named : OwnPath
        Which of its nodes are what.
    name : str
        Name that the part gets.

    Returns
    -------
    Part
        With a slot for each diode and transistor.
    list of FoundJunction
        What fills the slots.

    Raises
    ------
    NetlistError
        If the file is no circuit, or its nodes are not as named.
    """
    roles = _roles((("port", named.ports), ("bias entry", named.bias), ("ground", named.ground)), file)
    wrapped = _Wrapped(name, file, named.subcircuit, roles)
    outer = wrapped.terminals
    junctions = wrapped.junctions()
    ports, bias = (tuple(outer[node.lower()] for node in nodes) for nodes in (named.ports, named.bias))
    first, second = (outer[node.lower()] for node in named.through)
    part = _part(
        wrapped,
        "path",
        named.subcircuit,
        ports=ports,
        bias=bias,
        throws=(Throw(second, (first, second), named.passes_high, bias[0]),),
        inverted=tuple(outer[node.lower()] for node in named.inverted),
        slots=tuple(junction.slot for junction in junctions),
    )
    return part, junctions


def read_own_driver(file: Path, named: OwnDriver, name: str) -> Part:
    """Make a driver of a SPICE file without a header.

    Parameters
    ----------
    file : Path
        The file.
    named : OwnDriver
        Which of its nodes are what.
    name : str
        Name that the part gets.

    Returns
    -------
    Part
        Its supplies are those that are named.

    Raises
    ------
    NetlistError
        If the file is no circuit, or its nodes are not as named.
    """
    groups = (
        ("control", (named.control,)),
        ("output", (named.output,)),
        ("supply", tuple(named.supplies)),
        ("ground", named.ground),
    )
    wrapped = _Wrapped(name, file, named.subcircuit, _roles(groups, file))
    supplies = tuple(
        Parameter(wrapped.terminals[node.lower()], "V", volts, -1e4, 1e4, False, f"supply at the node {node}")
        for node, volts in named.supplies.items()
    )
    return _part(wrapped, "driver", named.subcircuit, supplies=supplies)


def _part(wrapped: _Wrapped, role: str, subcircuit: str | None, **facts: tuple[object, ...]) -> Part:
    file = wrapped.plain.file
    what = f"the subcircuit {subcircuit} of {file.name}" if subcircuit else f"the circuit of {file.name}"
    ends = "; ".join(f"{node} is its {role}" for node, role in wrapped.roles.items() if role in ("control", "output"))
    renamed = [
        f"the node {node} is called {name} in results"
        for node, name in wrapped.terminals.items()
        if node != name and wrapped.roles[node] not in ("control", "output")
    ]
    empty: dict[str, tuple[object, ...]] = dict.fromkeys(
        ("supplies", "ports", "bias", "throws", "inverted", "slots"), ()
    )
    return Part(
        name=wrapped.name,
        role=role,
        file=file,
        terminals=tuple(wrapped.terminals.values()),
        summary=f"{what} ({wrapped.contents()}){f'; {ends}' if ends else ''}",
        sources=(),
        notes=(*wrapped.plain.notes, *renamed, *wrapped.unseen()),
        parameters=(),
        probes=(),
        model=None,
        reserved=(),
        body=wrapped.body(),
        **{**empty, **facts},  # type: ignore[arg-type]
    )

