"""A circuit as SPICE text, with what the decks and the measurements have to know of it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

__all__ = ["Feed", "JunctionPlace", "JunctionProbe", "Netlist", "RfPort", "ThrowPlace"]


@dataclass(frozen=True)
class RfPort:
    """An RF port: its node, and the source behind its impedance [ohm]."""

    node: str
    source: str
    impedance: float


@dataclass(frozen=True)
class Feed:
    """A bias entry of the path and what feeds it.

    Attributes
    ----------
    entry : str
        Node of the bias entry.
    node : str
        Node of the driver's output.
    ammeter : str
        Zero-volt source between the two; its current flows into the path.
    inverted : bool
        Whether its driver gets the inverted command.
    """

    entry: str
    node: str
    ammeter: str
    inverted: bool


@dataclass(frozen=True)
class ThrowPlace:
    """A way of the RF through the path, in the flattened circuit.

    Attributes
    ----------
    name : str
        Name in results; empty where the path has a single way.
    through : tuple of int
        Places of the two ports whose transmission is judged (from, to).
    passes_high : bool
        True if RF passes while the command is high.
    forward : bool
        True if RF passes while its driver pushes forward current.
    feed : Feed
        The bias entry whose driver opens it.
    """

    name: str
    through: tuple[int, int]
    passes_high: bool
    forward: bool
    feed: Feed


@dataclass(frozen=True)
class JunctionProbe:
    """A quantity of one junction in the flattened circuit, as a sum of vectors that ngspice saves.

    Attributes
    ----------
    junction : str
        Instance in the path, for example ``xj1``.
    quantity : str
        ``charge`` [C], ``current`` [A] or ``reverse`` [V].
    terms : tuple of (float, str)
        Factor and vector.
    """

    junction: str
    quantity: str
    terms: tuple[tuple[float, str], ...]


@dataclass(frozen=True)
class JunctionPlace:
    """A junction of the path in the flattened circuit.

    Attributes
    ----------
    instance : str
        Instance in the path, for example ``xj1``.
    junction : str
        Name of its table in the design.
    nodes : mapping of str to str
        Flattened node at each of its terminals.
    ammeters : mapping of str to str
        Zero-volt source in each terminal but the last; its current flows into the junction.
    """

    instance: str
    junction: str
    nodes: Mapping[str, str]
    ammeters: Mapping[str, str]


@dataclass(frozen=True)
class Netlist:
    """Everything of a circuit that does not depend on the analysis.

    Attributes
    ----------
    text : str
        SPICE lines: subcircuits and instances, without control and RF sources.
    ports : tuple of RfPort
        In the order of the path.
    feeds : tuple of Feed
        Bias entries, in the order of the path.
    throws : tuple of ThrowPlace
        Ways of the RF, in the order of the path.
    junctions : tuple of JunctionPlace
        Junctions of the path, in its order.
    probes : tuple of JunctionProbe
        What to look at inside the junctions.
    supplies : tuple of str
        Names of the supply sources.
    """

    text: str
    ports: tuple[RfPort, ...]
    feeds: tuple[Feed, ...]
    throws: tuple[ThrowPlace, ...]
    junctions: tuple[JunctionPlace, ...]
    probes: tuple[JunctionProbe, ...]
    supplies: tuple[str, ...]

    @property
    def saved(self) -> tuple[str, ...]:
        """Device vectors that the probes need on a ``.save`` card."""
        vectors = {
            vector: None for probe in self.probes for _, vector in probe.terms if vector.startswith("@")
        }
        return tuple(vectors)
