"""Small-signal admittance of single elements as ngspice itself finds it, at the voltages of many instants of a run.

An element that is described by nothing but its own line can be put alone between voltage sources. One deck holds a
copy of it for each instant and each terminal that is excited, so that one AC analysis a carrier gives all of them.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from transim.circuit.decks import Deck, Origin, control_block, deck_head
from transim.circuit.elements import Circuit, Opaque
from transim.engine.rawfile import Plot
from transim.envelope.bias import Bias
from transim.envelope.junction import Array
from transim.errors import RawFileError
from transim.quantities import deck_number

__all__ = ["Admittance", "admittance_deck", "biased_instants", "read_admittances"]

#: Voltages between two instants change by no more than this share of their span, or this much [V].
_SHARE, _LEAST = 0.01, 1e-3
_MOST_INSTANTS = 400


@dataclass(frozen=True)
class Admittance:
    """Admittance matrix of an element along a run.

    Attributes
    ----------
    name : str
        The element.
    nodes : tuple of str
        k different nodes at which it is connected; ground and the nodes that supplies hold are left out.
    conductance, capacitance : ndarray, shape (n, k, k)
        Current into the element at each node over the voltage of each node: real part [S], imaginary part over the
        angular frequency [F].
    """

    name: str
    nodes: tuple[str, ...]
    conductance: Array
    capacitance: Array

    def along(self, instants: Array, time: Array) -> Admittance:
        """Return it along a finer time axis, linear between its instants.

        Parameters
        ----------
        instants : ndarray, shape (n,)
            Its instants [s].
        time : ndarray, shape (t,)
            The finer axis [s].
        """
        values = []
        for matrix in (self.conductance, self.capacitance):
            flat = matrix.reshape(len(instants), -1)
            between = np.array([np.interp(time, instants, column) for column in flat.T])
            values.append(between.T.reshape(len(time), *matrix.shape[1:]))
        return replace(self, conductance=values[0], capacitance=values[1])

    def at(self, points: npt.NDArray[np.intp]) -> Admittance:
        """Return it at some of its points only."""
        return replace(self, conductance=self.conductance[points], capacitance=self.capacitance[points])


def biased_instants(elements: Sequence[Opaque], bias: Bias) -> npt.NDArray[np.intp]:
    """Return points of a run between which the voltages at some elements change little.

    Parameters
    ----------
    elements : sequence of Opaque
        The elements.
    bias : Bias
        Of the run, n points.

    Returns
    -------
    ndarray of int
        Increasing, with the first and the last point, at most 400.
    """
    nodes = dict.fromkeys(node for element in elements for node in element.nodes if node != "0")
    waves = np.array([bias.voltage(node) for node in nodes]).reshape(len(nodes), bias.points)
    scale = np.maximum(_SHARE * np.ptp(waves, axis=1, keepdims=True), _LEAST)
    # distance along the way that the voltages go, in steps of which each is small
    way = np.concatenate(([0.0], np.cumsum(np.abs(np.diff(waves / scale, axis=1)).max(axis=0, initial=0.0))))
    steps = min(int(np.ceil(way[-1])), _MOST_INSTANTS - 2) + 1
    points = np.searchsorted(way, np.linspace(0.0, way[-1], steps + 1))
    # where nothing moves, the last point before it moves again keeps the plateau flat
    points = np.concatenate((points, points - 1, [0, bias.points - 1]))
    return np.unique(np.clip(points, 0, bias.points - 1)).astype(np.intp)


def admittance_deck(
    name: str, elements: Sequence[Opaque], quiet: frozenset[str], circuit: Circuit, bias: Bias, frequency: float,
    origin: Origin,
) -> Deck:  # fmt: skip
    """Write a deck in which each element stands alone, once for each instant and excited node.

    Parameters
    ----------
    name : str
        Stem of its file name.
    elements : sequence of Opaque
        Elements whose line stands for itself.
    quiet : frozenset of str
        Nodes that supplies hold.
    circuit : Circuit
        Its models are used.
    bias : Bias
        At the instants.
    frequency : float
        Of the AC analysis [Hz].
    origin : Origin
        For the head.

    Returns
    -------
    Deck
        Its raw file holds one AC plot.
    """
    lines = list(circuit.model_cards)
    for place, element in enumerate(elements):
        different = list(dict.fromkeys(node for node in element.nodes if node != "0"))
        for excited, node in enumerate(_open_nodes(element, quiet)):
            for point in range(bias.points):
                stem = f"{place}_{excited}_{point}"
                own = {other: f"n{stem}_{k}" for k, other in enumerate(different)}
                for k, other in enumerate(different):
                    volts = deck_number(float(bias.voltage(other)[point]))
                    lines.append(f"V{stem}_{k} {own[other]} 0 DC {volts} AC {1 if other == node else 0}")
                wires = " ".join(own.get(other, "0") for other in element.nodes)
                lines.append(f"{element.name[0]}{stem} {wires} {element.rest}")
    what = [
        "Admittance: elements that the envelope analysis has no form of, each alone at the voltages of instants of the",
        "video run; AC with 1 V at one of its nodes.",
    ]
    number = deck_number(frequency)
    script = control_block([f"ac lin 1 {number} {number}", f"write {name}.raw all"])
    options = f".options temp={deck_number(origin.temperature)} noacct"
    text = deck_head(name, origin, what, True) + "\n".join([*lines, options, *script, ".end"]) + "\n"
    return Deck(name, text, writes_raw=True)


def read_admittances(
    plot: Plot, elements: Sequence[Opaque], quiet: frozenset[str], points: int, frequency: float
) -> dict[str, Admittance]:
    """Read what the deck gave.

    Parameters
    ----------
    plot : Plot
        Its AC plot.
    elements : sequence of Opaque
        As in the deck.
    quiet : frozenset of str
        Nodes that supplies hold.
    points : int
        Instants.
    frequency : float
        Of the AC analysis [Hz].

    Returns
    -------
    dict of str to Admittance
        By element.

    Raises
    ------
    RawFileError
        If a current is missing.
    """
    currents: Mapping[str, complex] = {
        name: complex(value) for name, value in zip(plot.names, plot.data[0], strict=True)
    }
    found = {}
    for place, element in enumerate(elements):
        different = list(dict.fromkeys(node for node in element.nodes if node != "0"))
        nodes = _open_nodes(element, quiet)
        y = np.zeros((points, len(nodes), len(nodes)), dtype=complex)
        for column in range(len(nodes)):
            for point in range(points):
                for row, node in enumerate(nodes):
                    name = f"i(v{place}_{column}_{point}_{different.index(node)})"
                    if name not in currents:
                        raise RawFileError(f"the admittance deck gave no {name}")
                    # a source's current flows from its plus node through the source
                    y[point, row, column] = -currents[name]
        found[element.name] = Admittance(element.name, nodes, y.real.copy(), y.imag / (2.0 * np.pi * frequency))
    return found


def _open_nodes(element: Opaque, quiet: frozenset[str]) -> tuple[str, ...]:
    """Return the different nodes of an element that can have RF voltages."""
    return tuple(dict.fromkeys(node for node in element.nodes if node != "0" and node not in quiet))
