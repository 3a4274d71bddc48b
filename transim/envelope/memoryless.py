"""A network without what has no memory: unknowns eliminated once, before the ringing solution integrates the rest.

An equation and an unknown without capacitance, without delay and without an entry that changes hold at each instant by
themselves, whatever the carrier and the step. In a p-i-n junction of many cells these are three quarters of all.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace

import numpy as np

from transim.envelope.network import Network
from transim.envelope.reduction import complete_pivots, scaled_to_one
from transim.envelope.scatter import Complex, solve_linear

__all__ = ["without_memoryless"]


def without_memoryless(network: Network, right: Complex, wanted: Iterable[str]) -> tuple[Network, Complex]:
    """Return a smaller network with the same solution for the unknowns that are left, and its right-hand sides.

    Parameters
    ----------
    network : Network
        m unknowns; its `junctions` are not carried over.
    right : ndarray of complex, shape (m, p)
        Right-hand sides, constant in time.
    wanted : iterable of str
        Unknowns that have to stay, by name.

    Returns
    -------
    Network
        k unknowns: the Schur complement of G (G. H. Golub, C. F. Van Loan, Matrix Computations), and C as it was.
    ndarray of complex, shape (k, p)
    """
    stored, places = network.constant_c != 0.0, np.arange(network.size)
    held_rows = [*network.rows, *(entry.row for entry in network.delays)]
    held_columns = [*network.columns, *(entry.column for entry in network.delays)]
    held_columns += [network.unknowns[name] for name in wanted]
    free_rows = np.setdiff1d(places[~stored.any(axis=1)], held_rows)
    free_columns = np.setdiff1d(places[~stored.any(axis=0)], held_columns)
    conductance = network.constant_g.astype(complex)
    chosen = complete_pivots(scaled_to_one(conductance)[np.ix_(free_rows, free_columns)])
    gone_rows, gone = free_rows[chosen[0]], free_columns[chosen[1]]
    if not gone.size:
        return network, right
    equations, kept = np.setdiff1d(places, gone_rows), np.setdiff1d(places, gone)
    outer = np.concatenate([conductance[np.ix_(gone_rows, kept)], right[gone_rows]], axis=1)
    inner = solve_linear(conductance[np.ix_(gone_rows, gone)], outer)
    crossing = network.constant_g[np.ix_(equations, gone)]
    row, column = np.searchsorted(equations, places), np.searchsorted(kept, places)
    names = {place: name for name, place in network.unknowns.items()}
    smaller = replace(
        network,
        unknowns={names[int(place)]: k for k, place in enumerate(kept)},
        constant_g=network.constant_g[np.ix_(equations, kept)] - crossing @ np.real(inner[:, : kept.size]),
        constant_c=network.constant_c[np.ix_(equations, kept)],
        rows=row[network.rows],
        columns=column[network.columns],
        delays=tuple(
            replace(entry, row=int(row[entry.row]), column=int(column[entry.column])) for entry in network.delays
        ),
        junctions=(),
    )
    return smaller, right[equations] - crossing @ inner[:, kept.size :]
