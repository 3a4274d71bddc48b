"""RF voltages and currents inside the circuit, at single instants of the video run."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import numpy.typing as npt

from transim.circuit.netlist import RfPort
from transim.envelope.junction import Array
from transim.envelope.network import Network
from transim.envelope.reduction import Reduction

__all__ = ["RfSolution", "solve_internal"]


class RfSolution:
    """All unknowns for a source of 1 V peak behind one port's impedance, at n instants.

    Parameters
    ----------
    network : Network
        At the instants.
    x : ndarray of complex, shape (n, m)
        The unknowns [V, A].
    """

    def __init__(self, network: Network, x: npt.NDArray[np.complex128]) -> None:
        self._network = network
        self._x = x

    def voltage(self, plus: str, minus: str = "0") -> npt.NDArray[np.complex128]:
        """Return the RF voltage between two nodes [V], shape (n,); a node that a supply holds has none."""
        return self._node(plus) - self._node(minus)

    def current(self, source: str) -> npt.NDArray[np.complex128]:
        """Return the RF current through a source [A], shape (n,)."""
        return np.asarray(self._x[:, self._network.unknowns[f"i:{source}"]])

    def _node(self, node: str) -> npt.NDArray[np.complex128]:
        place = self._network.unknowns.get(f"v:{node}")
        return np.zeros(len(self._x), dtype=complex) if place is None else np.asarray(self._x[:, place])

    def modulation(self, conducting: Array) -> Mapping[str, Array]:
        """Return, by device, the RF amplitude across its junctions in units of N Vt, shape (n,).

        Parameters
        ----------
        conducting : ndarray, shape (n,)
            Least current for which a junction counts as conducting [A].

        Notes
        -----
        An exponential law is linear to the extent that this is small against one; for a charge-controlled
        junction it is the share by which the RF modulates the injected charge.
        """
        found: dict[str, Array] = {}
        for junction in self._network.junctions:
            ends = [self._x[:, k] if k >= 0 else 0.0 for k in (junction.plus, junction.minus)]
            share = np.abs(ends[0] - ends[1]) / junction.scale
            share = np.where(junction.current >= conducting, share, 0.0)
            found[junction.device] = np.maximum(found.get(junction.device, 0.0), share)
        return found


def solve_internal(
    network: Network, port: RfPort, carrier: float, reduction: Reduction | None = None
) -> RfSolution:
    """Solve for everything inside the circuit.

    Parameters
    ----------
    network : Network
        At n instants.
    port : RfPort
        Where the RF enters.
    carrier : float
        Frequency [Hz].
    reduction : Reduction or None
        Of a network of the same circuit, if there is one.

    Returns
    -------
    RfSolution

    Raises
    ------
    LinearisationError
        If the network is singular.
    """
    right = np.zeros((network.size, 1), dtype=complex)
    right[network.unknowns[f"i:{port.source}"], 0] = 1.0
    omega = 2j * np.pi * carrier
    reduction = reduction or Reduction(network, omega)
    return RfSolution(network, reduction.solve(network, right, omega)[:, :, 0])
