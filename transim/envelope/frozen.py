"""Frozen solution: every time point of the network as if it stood still, d/dt dropped.

A time point is solved only where the network has changed since the last one that was; in between S is interpolated.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from transim.circuit.netlist import RfPort
from transim.envelope.network import Network
from transim.envelope.reduction import Reduction
from transim.envelope.scatter import Scattering, excitation, scatter_at_ports

__all__ = ["changing_points", "solve_frozen"]

#: Change of an entry that asks for a new solution; linear interpolation then errs by its square.
_SHARE = 2e-3
#: Time points that are compared at once.
_AHEAD = 8


def changing_points(network: Network, share: float = _SHARE) -> npt.NDArray[np.intp]:
    """Return the time points that suffice: between two of them no entry of G or C changes by more than a small share.

    Parameters
    ----------
    network : Network
        n time points.
    share : float
        Largest relative change of an entry.

    Returns
    -------
    ndarray of int
        Increasing; first and last point included, and the point before each that is kept, so that a
        flat stretch stays flat.
    """
    scaled = network.scaled_changes()
    jumps = (np.abs(np.diff(scaled, axis=0)).max(axis=1, initial=0.0) > share).tolist()
    points = [0]
    point, ahead = 1, _AHEAD
    while point < len(scaled):
        if points[-1] == point - 1 and jumps[point - 1]:
            points.append(point)
            point += 1
            continue
        # where nothing has moved, look further ahead each time
        moved = np.abs(scaled[point : point + ahead] - scaled[points[-1]]).max(axis=1, initial=0.0) > share
        step = int(moved.argmax())
        if moved[step]:
            points += [point + step - 1, point + step]
            point, ahead = point + step + 1, _AHEAD
        else:
            point, ahead = point + ahead, 2 * ahead
    points.append(len(scaled) - 1)
    return np.unique(np.array(points, dtype=np.intp))


def solve_frozen(
    network: Network, ports: Sequence[RfPort], frequency: Sequence[float], reduction: Reduction | None = None
) -> Scattering:
    """Solve the network at every time point as if it stood still.

    Parameters
    ----------
    network : Network
        n time points.
    ports : sequence of RfPort
        p ports.
    frequency : sequence of float
        f carriers [Hz].
    reduction : Reduction or None
        Of a network of the same circuit, if there is one.

    Returns
    -------
    Scattering

    Raises
    ------
    LinearisationError
        If the network is singular.
    """
    points = changing_points(network)
    thin = network.at(points)
    reduction = reduction or Reduction(thin, 2j * np.pi * frequency[0])
    right = excitation(network, ports)
    nodes = np.array([network.unknowns[f"v:{port.node}"] for port in ports], dtype=np.intp)
    s = np.empty((len(frequency), network.time.size, len(ports), len(ports)), dtype=complex)
    for k, carrier in enumerate(frequency):
        solved = scatter_at_ports(ports, reduction.solve(thin, right, 2j * np.pi * carrier, nodes))
        for row in range(len(ports)):
            for column in range(len(ports)):
                s[k, :, row, column] = np.interp(network.time, thin.time, solved[:, row, column])
    return Scattering(network.time, np.asarray(frequency, dtype=float), s, "frozen")
