"""Frozen solution: every time point of the network as if it stood still, d/dt dropped.

A time point is solved only where the network has changed since the last one that was; in between S is interpolated.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from transim.circuit.assemble import RfPort
from transim.envelope.network import Network
from transim.envelope.scatter import Complex, Scattering, excitation, scatter, solve_linear

__all__ = ["changing_points", "solve_frozen"]

#: Time points solved at once: bounds the memory of a batch.
_BATCH = 2048
#: Change of an entry that asks for a new solution; linear interpolation then errs by its square.
_SHARE = 2e-3
#: Time points that are compared at once.
_AHEAD = 8
#: An inner part worse than this is not eliminated.
_WORST_CONDITION = 1e12


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


def solve_frozen(network: Network, ports: Sequence[RfPort], frequency: Sequence[float]) -> Scattering:
    """Solve the network at every time point as if it stood still.

    Parameters
    ----------
    network : Network
        n time points.
    ports : sequence of RfPort
        p ports.
    frequency : sequence of float
        f carriers [Hz].

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
    kept = _kept(network, ports)
    s = np.empty((len(frequency), network.time.size, len(ports), len(ports)), dtype=complex)
    for k, carrier in enumerate(frequency):
        solved = _solve_at(thin, ports, 2j * np.pi * carrier, kept)
        for row in range(len(ports)):
            for column in range(len(ports)):
                s[k, :, row, column] = np.interp(network.time, thin.time, solved[:, row, column])
    return Scattering(network.time, np.asarray(frequency, dtype=float), s, "frozen")


def _kept(network: Network, ports: Sequence[RfPort]) -> npt.NDArray[np.intp]:
    """Return the unknowns that have to stay: those of entries that change, and what only they hold together."""
    kept = {*network.rows.tolist(), *network.columns.tolist()}
    for port in ports:
        kept |= {network.unknowns[f"v:{port.node}"], network.unknowns[f"i:{port.source}"]}
    pattern = (network.constant_g != 0.0) | (network.constant_c != 0.0)
    for entry in network.delays:
        pattern[entry.row, entry.column] = True
    rest = set(range(network.size)) - kept
    # a source between two nodes that stay has an empty row among the rest, and cannot be eliminated
    lonely = rest
    while lonely:
        columns = sorted(rest)
        lonely = {row for row in rest if not (pattern[row, columns].any() and pattern[columns, row].any())}
        rest -= lonely
    return np.array(sorted(set(range(network.size)) - rest), dtype=np.intp)


def _solve_at(
    network: Network, ports: Sequence[RfPort], omega: complex, kept: npt.NDArray[np.intp]
) -> Complex:
    """Return S at every time point, shape (n, p, p), for one j w; unknowns that are not kept are eliminated once."""
    right = excitation(network, ports)
    matrix = network.constant(omega)
    rest = np.setdiff1d(np.arange(network.size), kept)
    if rest.size:
        inner = matrix[np.ix_(rest, rest)]
        if np.linalg.cond(inner) > _WORST_CONDITION:
            kept = np.arange(network.size)
        else:
            matrix[np.ix_(kept, kept)] -= matrix[np.ix_(kept, rest)] @ np.linalg.solve(
                inner, matrix[np.ix_(rest, kept)]
            )
    matrix = matrix[np.ix_(kept, kept)]
    rows, columns = np.searchsorted(kept, network.rows), np.searchsorted(kept, network.columns)
    varying = network.varying_g + omega * network.varying_c
    x = np.zeros((network.time.size, network.size, len(ports)), dtype=complex)
    for first in range(0, network.time.size, _BATCH):
        batch = slice(first, first + _BATCH)
        matrices = np.broadcast_to(matrix, (len(varying[batch]), *matrix.shape)).copy()
        matrices[:, rows, columns] += varying[batch]
        x[batch, kept] = solve_linear(matrices, right[kept])
    return scatter(network, ports, x)
