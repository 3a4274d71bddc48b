"""How much an element moves S whatever it does, and how much a part of its admittance does.

With the linearised network A x = s, an admittance Y at the nodes P of an element changes the solution to
x - A^-1 P Y (1 + Z Y)^-1 P' x with Z = P' A^-1 P (Woodbury's identity), so that one solution of the network serves any
number of trials.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from transim.circuit.elements import Opaque
from transim.circuit.netlist import RfPort
from transim.envelope.admittance import Admittance
from transim.envelope.network import Network
from transim.envelope.scatter import Complex, excitation, scatter, solve_linear
from transim.envelope.stationary import level_of

__all__ = ["Doubt", "doubt_points"]

#: An admittance that ties nodes together [S].
_TIE = 1e4
#: Trial admittances and transadmittances, two a decade [S].
_TRIALS = np.logspace(-5.0, 1.0, 13)
_TRANSFERS = np.logspace(-5.0, 0.0, 11)
#: Points of the run that are looked at.
_MOST_POINTS = 160


def doubt_points(candidates: npt.NDArray[np.intp]) -> npt.NDArray[np.intp]:
    """Return no more points than are worth looking at, the first and the last among them.

    Parameters
    ----------
    candidates : ndarray of int
        Increasing points of a run.
    """
    if candidates.size <= _MOST_POINTS:
        return candidates
    return np.asarray(candidates[np.unique(np.linspace(0, candidates.size - 1, _MOST_POINTS).astype(np.intp))])


@dataclass(frozen=True)
class _Solved:
    """One carrier: S, the voltages at the elements' nodes, and what currents into these nodes do to both."""

    s: Complex
    open_voltage: Complex
    impedance: Complex
    reach: Complex


class Doubt:
    """Changes of S by single elements, at n points of a run.

    Parameters
    ----------
    network : Network
        At n points; what stands for an element in it is what changes count from.
    ports : sequence of RfPort
        p ports.
    frequency : sequence of float
        Carriers [Hz].
    elements : sequence of Opaque
        The elements.
    quiet : frozenset of str
        Nodes that supplies hold.
    """

    def __init__(
        self,
        network: Network,
        ports: Sequence[RfPort],
        frequency: Sequence[float],
        elements: Sequence[Opaque],
        quiet: frozenset[str],
    ) -> None:
        self._nodes = tuple(
            dict.fromkeys(n for element in elements for n in element.nodes if n != "0" and n not in quiet)
        )
        self._elements = {element.name: element for element in elements}
        self._quiet = quiet
        self._frequency = tuple(frequency)
        self._solved = [self._solve(network, ports, carrier) for carrier in frequency]

    def _solve(self, network: Network, ports: Sequence[RfPort], carrier: float) -> _Solved:
        places = [network.unknowns[f"v:{node}"] for node in self._nodes]
        currents = np.zeros((network.size, len(places)), dtype=complex)
        currents[places, np.arange(len(places))] = 1.0
        right = np.concatenate((excitation(network, ports), currents), axis=1)
        omega = 2j * np.pi * carrier
        matrices = np.broadcast_to(network.constant(omega), (network.time.size, network.size, network.size)).copy()
        matrices[:, network.rows, network.columns] += network.varying_g + omega * network.varying_c
        x = solve_linear(matrices, right)
        p = len(ports)
        # a wave out of a port is twice its voltage for each volt behind a port's impedance
        impedance = np.array([port.impedance for port in ports])
        scale = 2.0 * np.sqrt(impedance[None, :] / impedance[:, None])
        at_ports = x[:, [network.unknowns[f"v:{port.node}"] for port in ports], p:]
        return _Solved(scatter(network, ports, x[:, :, :p]), x[:, places, :p], x[:, places, p:], scale[0, 0] * at_ports)

    def _changed(self, solved: _Solved, y: Complex) -> Complex:
        """Return S with an admittance matrix over all nodes added, shape (n, p, p)."""
        if not self._nodes:
            return solved.s
        y = np.broadcast_to(y, solved.impedance.shape)
        used = np.flatnonzero((np.abs(y).max(axis=(0, 1)) + np.abs(y).max(axis=(0, 2))) > 0.0)
        if used.size == 0:
            return solved.s
        y = y[:, used[:, None], used[None, :]]
        z = solved.impedance[:, used[:, None], used[None, :]]
        system = np.eye(used.size) + z @ y
        voltages = solve_linear(np.asarray(system), solved.open_voltage[:, used])
        return np.asarray(solved.s - solved.reach[:, :, used] @ (y @ voltages))

    def whatever(self, name: str, enough: float) -> float:
        """Return by how much an element moves any entry of S at most [dB].

        It may be open, tied together, anything between, or a current at one terminal that the voltage at another
        controls.

        Parameters
        ----------
        name : str
            The element; the others are open, or have all their terminals tied together.
        enough : float
            Change above which nothing more is tried [dB].
        """
        return self._largest(name, (self._tied(name), *self._passive(name), *self._transfers(name)), enough)

    def between(self, name: str) -> float:
        """Return by how much an element moves any entry of S between open and tied together [dB].

        Parameters
        ----------
        name : str
            The element; the others are open, or have all their terminals tied together.
        """
        return self._largest(name, (self._tied(name), *self._passive(name)), np.inf)

    def _largest(self, name: str, trials: Sequence[Complex], enough: float) -> float:
        others = sum(
            (self._tied(other) for other in self._elements if other != name), np.zeros((len(self._nodes),) * 2, complex)
        )
        largest = 0.0
        for solved in self._solved:
            for rest in (np.zeros_like(others), others)[: 1 + bool(others.any())]:
                before = level_of(self._changed(solved, rest))
                for trial in trials:
                    after = level_of(self._changed(solved, rest + trial))
                    largest = max(largest, float(np.abs(after - before).max()))
                    if largest > enough:
                        return largest
        return largest

    def by_share(
        self, found: Sequence[Mapping[str, Admittance]], middle: int, share: float, pairs: Sequence[tuple[int, int]]
    ) -> dict[str, float]:
        """Return by how much a share of each element's admittance moves some transmissions [dB].

        Parameters
        ----------
        found : sequence of mapping of str to Admittance
            Admittances at the points, one mapping a carrier.
        middle : int
            Place of the carrier whose admittances stand in the network at all carriers.
        share : float
            Of conductances and of capacitances, either way; the difference between carriers comes on top.
        pairs : sequence of tuple of int
            Places of the ports from and to which RF goes.

        Returns
        -------
        dict of str to float
            By element.
        """
        result = {}
        for name, standing in found[middle].items():
            largest = 0.0
            for solved, carrier, real in zip(self._solved, self._frequency, found, strict=True):
                g, b = standing.conductance, 2.0 * np.pi * carrier * standing.capacitance
                own_g, own_b = real[name].conductance, 2.0 * np.pi * carrier * real[name].capacitance
                for first, second in ((1.0, 0.0), (-1.0, 0.0), (0.0, 1.0), (0.0, -1.0)):
                    y = (own_g - g) + share * first * own_g + 1j * ((own_b - b) + share * second * own_b)
                    largest = max(largest, self._difference(solved, self._spread(standing.nodes, y), pairs))
            result[name] = largest
        return result

    def _difference(self, solved: _Solved, y: Complex, pairs: Sequence[tuple[int, int]]) -> float:
        change = np.abs(level_of(self._changed(solved, y)) - level_of(solved.s))
        return max(float(change[:, to, start].max()) for start, to in pairs)

    def _spread(self, nodes: Sequence[str], y: Complex) -> Complex:
        """Return a matrix over all nodes with that of some of them in it, shape (n, K, K)."""
        places = np.array([self._nodes.index(node) for node in nodes], dtype=np.intp)
        whole = np.zeros((len(y), len(self._nodes), len(self._nodes)), dtype=complex)
        whole[:, places[:, None], places[None, :]] = y
        return whole

    def _places(self, name: str) -> tuple[list[int], bool]:
        """Return the places of an element's nodes, and whether it has a terminal without RF voltage."""
        nodes = self._elements[name].nodes
        live = [node for node in dict.fromkeys(nodes) if node in self._nodes]
        return [self._nodes.index(node) for node in live], any(node not in self._nodes for node in nodes)

    def _between(self, first: Sequence[int], second: Sequence[int], y: complex) -> Complex:
        """Return an admittance between two groups of nodes; an empty group is ground."""
        whole = np.zeros((len(self._nodes), len(self._nodes)), dtype=complex)
        # either group has one node where the other has several
        for i in first or (-1,):
            for k in second or (-1,):
                for row, column, sign in ((i, i, 1.0), (k, k, 1.0), (i, k, -1.0), (k, i, -1.0)):
                    if row >= 0 and column >= 0:
                        whole[row, column] += sign * y
        return whole

    def _tied(self, name: str) -> Complex:
        places, grounded = self._places(name)
        if grounded:
            return self._between(places, (), _TIE)
        return self._between(places[1:], places[:1], _TIE) if places else self._between((), (), 0.0)

    def _ends(self, name: str) -> list[tuple[int, ...]]:
        """Return the terminals of an element that differ at RF; an empty one is ground."""
        places, grounded = self._places(name)
        return [(place,) for place in places] + ([()] if grounded else [])

    def _passive(self, name: str) -> Iterator[Complex]:
        """Go through admittances between two terminals, the others open or tied to one of them.

        What S may become is the image of where Y may lie under a Moebius map: its extremes belong to the edges,
        real Y and imaginary Y.
        """
        places, grounded = self._places(name)
        ends = self._ends(name)
        for size in (y for magnitude in _TRIALS for y in (magnitude, 1j * magnitude)):
            for position, first in enumerate(ends):
                for second in ends[position + 1 :]:
                    yield self._between(first, second, size)
            for first in ends[: len(places)] if len(ends) > 2 else ():
                rest = [place for place in places if place not in first]
                tie = self._between(rest, (), _TIE) if grounded else self._between(rest[1:], rest[:1], _TIE)
                yield tie + self._between(first, () if grounded else rest[:1], size)

    def _transfers(self, name: str) -> Iterator[Complex]:
        """Go through transadmittances: a current at one terminal that the voltage at another controls."""
        places, grounded = self._places(name)
        for out in places if len(places) + grounded > 2 else ():
            back = next((place for place in places if place != out), out)
            for control in places:
                for size in (*_TRANSFERS, *-_TRANSFERS):
                    transfer = np.zeros((len(self._nodes), len(self._nodes)), dtype=complex)
                    transfer[out, control] = size
                    if not grounded:
                        transfer[back, control] = -size
                    yield transfer
