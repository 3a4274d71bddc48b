"""Scattering parameters of a time-varying linear network at any number of carriers.

*Frozen* drops d/dt: each time point is a stationary network. *Ringing* keeps it and integrates by BDF2 on the video run's own time points
(variable step; C. W. Gear, Numerical Initial Value Problems in Ordinary Differential Equations, 1971), which damps the modes near -j w
that a trapezoidal rule would keep.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from transim.errors import LinearisationError
from transim.envelope.linearise import Network

__all__ = ["Port", "Scattering", "group_delay", "solve_frozen", "solve_ringing"]

Complex = npt.NDArray[np.complex128]
#: Time points solved at once: bounds the memory of a batch.
_BATCH = 2048


@dataclass(frozen=True)
class Port:
    """An RF port: node, its source's name in the netlist, and reference impedance [ohm]."""

    node: str
    source: str
    impedance: float


@dataclass(frozen=True)
class Scattering:
    """S-parameters against time.

    Attributes
    ----------
    time : ndarray, shape (n,)
        Time of the samples [s].
    frequency : ndarray, shape (f,)
        Carriers [Hz].
    s : ndarray, shape (f, n, p, p)
        s[..., i, j]: wave out of port i for a wave into port j, each to its own impedance.
    internal : ndarray, shape (f, n, p, m)
        All unknowns for a source of 1 V behind each port's impedance [V, A].
    method : str
        ``frozen`` or ``ringing``.
    """

    time: npt.NDArray[np.float64]
    frequency: npt.NDArray[np.float64]
    s: Complex
    internal: Complex | None
    method: str


def _excitation(network: Network, ports: Sequence[Port]) -> Complex:
    right = np.zeros((network.size, len(ports)), dtype=complex)
    for k, port in enumerate(ports):
        right[network.unknowns[f"i:{port.source}"], k] = 1.0
    return right


def _scatter(network: Network, ports: Sequence[Port], x: Complex) -> Complex:
    """Turn solutions, shape (..., m, p), into S-parameters, shape (..., p, p)."""
    nodes = [network.unknowns[f"v:{port.node}"] for port in ports]
    impedance = np.array([port.impedance for port in ports])
    scale = 2.0 * np.sqrt(impedance[None, :] / impedance[:, None])
    return np.asarray(x[..., nodes, :] * scale - np.eye(len(ports)))


def _matrices(network: Network, omega: float, first: int, last: int) -> Complex:
    base = network.constant_g + 1j * omega * network.constant_c
    matrices = np.broadcast_to(base, (last - first, network.size, network.size)).copy()
    varying = network.varying_g[first:last] + 1j * omega * network.varying_c[first:last]
    matrices[:, network.rows, network.columns] += varying
    return matrices


def _solve(matrices: Complex, right: Complex) -> Complex:
    try:
        return np.asarray(np.linalg.solve(matrices, right))
    except np.linalg.LinAlgError as error:
        raise LinearisationError("circuit", "the linearised network is singular (a node without connection)") from error


def solve_frozen(network: Network, ports: Sequence[Port], frequency: Sequence[float], *, keep: bool = False) -> Scattering:
    """Solve the network at every time point as if it stood still.

    Parameters
    ----------
    network : Network
        n time points.
    ports : sequence of Port
        p ports.
    frequency : sequence of float
        f carriers [Hz].
    keep : bool
        Keep all unknowns in `Scattering.internal`.

    Returns
    -------
    Scattering

    Raises
    ------
    LinearisationError
        If the network is singular.
    """
    right = _excitation(network, ports)
    points = network.time.size
    s = np.empty((len(frequency), points, len(ports), len(ports)), dtype=complex)
    internal = np.empty((len(frequency), points, network.size, len(ports)), dtype=complex) if keep else None
    reduced = _Reduction(network, ports)
    for k, carrier in enumerate(frequency):
        omega = 2.0 * np.pi * carrier
        for first in range(0, points, _BATCH):
            last = min(first + _BATCH, points)
            if internal is None:
                s[k, first:last] = reduced.scatter(omega, first, last)
                continue
            x = _solve(_matrices(network, omega, first, last), right)
            s[k, first:last] = _scatter(network, ports, x)
            internal[k, first:last] = x
    return Scattering(network.time, np.asarray(frequency, dtype=float), s, internal, "frozen")


class _Reduction:
    """Eliminates, once for each carrier, the unknowns whose rows and columns do not change with time."""

    def __init__(self, network: Network, ports: Sequence[Port]) -> None:
        self.network, self.ports = network, ports
        keep = {*network.rows.tolist(), *network.columns.tolist()}
        keep |= {network.unknowns[f"v:{port.node}"] for port in ports}
        keep |= {network.unknowns[f"i:{port.source}"] for port in ports}
        self.kept = np.array(sorted(keep), dtype=np.intp)
        self.rest = np.array(sorted(set(range(network.size)) - keep), dtype=np.intp)
        place = {int(unknown): k for k, unknown in enumerate(self.kept)}
        self.rows = np.array([place[int(row)] for row in network.rows], dtype=np.intp)
        self.columns = np.array([place[int(column)] for column in network.columns], dtype=np.intp)
        self.right = _excitation(network, ports)

    def scatter(self, omega: float, first: int, last: int) -> Complex:
        """Return S at some time points, shape (points, p, p)."""
        network = self.network
        base = network.constant_g + 1j * omega * network.constant_c
        inner = base[np.ix_(self.rest, self.rest)]
        # an inner part that is singular by itself (a source between two kept nodes) is solved unreduced
        if not self.rest.size or np.linalg.cond(inner) > 1e13:
            x = _solve(_matrices(network, omega, first, last), self.right)
            return _scatter(network, self.ports, x)
        outer = base[np.ix_(self.kept, self.kept)] - base[np.ix_(self.kept, self.rest)] @ np.linalg.solve(
            inner, base[np.ix_(self.rest, self.kept)]
        )
        matrices = np.broadcast_to(outer, (last - first, *outer.shape)).copy()
        varying = network.varying_g[first:last] + 1j * omega * network.varying_c[first:last]
        matrices[:, self.rows, self.columns] += varying
        x = np.zeros((last - first, network.size, len(self.ports)), dtype=complex)
        x[:, self.kept] = _solve(matrices, self.right[self.kept])
        return _scatter(network, self.ports, x)


def solve_ringing(network: Network, ports: Sequence[Port], frequency: Sequence[float]) -> Scattering:
    """Integrate the network's own transients at the carrier, from the stationary state of the first point.

    Parameters
    ----------
    network : Network
        n time points.
    ports : sequence of Port
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
    right = _excitation(network, ports)
    omega = 2j * np.pi * np.asarray(frequency, dtype=float)[:, None, None]
    time = network.time

    def at(point: int) -> tuple[Complex, Complex]:
        g = network.constant_g.astype(complex)
        c = network.constant_c.astype(complex)
        g[network.rows, network.columns] += network.varying_g[point]
        c[network.rows, network.columns] += network.varying_c[point]
        return g, c

    conductance, capacitance = at(0)
    x = _solve(conductance + omega * capacitance, right)
    s = np.empty((len(frequency), time.size, len(ports), len(ports)), dtype=complex)
    s[:, 0] = _scatter(network, ports, x)
    charge = [capacitance @ x, capacitance @ x]
    previous_step = 0.0
    for point in range(1, time.size):
        step = float(time[point] - time[point - 1])
        ratio = step / previous_step if previous_step > 0.0 else 0.0
        # variable-step BDF2; ratio 0 is the implicit Euler step that starts it
        lead = (1.0 + 2.0 * ratio) / (1.0 + ratio) / step
        one = (1.0 + ratio) / step
        two = -ratio * ratio / (1.0 + ratio) / step
        conductance, capacitance = at(point)
        x = _solve(conductance + (omega + lead) * capacitance, right + one * charge[0] + two * charge[1])
        s[:, point] = _scatter(network, ports, x)
        charge = [capacitance @ x, charge[0]]
        previous_step = step
    return Scattering(time, np.asarray(frequency, dtype=float), s, None, "ringing")


def group_delay(network: Network, ports: Sequence[Port], carrier: float, pair: tuple[int, int]) -> npt.NDArray[np.float64]:
    """Return |d ln S / dw| of one port pair at every time point, the time that the network itself takes.

    Parameters
    ----------
    network : Network
        n time points.
    ports : sequence of Port
        All ports.
    carrier : float
        Frequency [Hz].
    pair : tuple of int
        Row and column of S.

    Returns
    -------
    ndarray, shape (n,)
        Group delay, amplitude slope included [s].
    """
    spread = 1e-4
    both = solve_frozen(network, ports, [carrier * (1.0 - spread), carrier * (1.0 + spread)]).s[:, :, pair[0], pair[1]]
    middle = 0.5 * (both[0] + both[1])
    return np.asarray(np.abs((both[1] - both[0]) / middle) / (2.0 * np.pi * carrier * 2.0 * spread))
