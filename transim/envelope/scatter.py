"""Ports, S-parameters, and how a solved network becomes them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from transim.circuit.netlist import RfPort
from transim.envelope.network import Network
from transim.errors import LinearisationError

__all__ = ["Complex", "Scattering", "excitation", "scatter", "scatter_at_ports", "solve_linear"]

Complex = npt.NDArray[np.complex128]


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
    method : str
        ``frozen`` or ``ringing``.
    """

    time: npt.NDArray[np.float64]
    frequency: npt.NDArray[np.float64]
    s: Complex
    method: str


def excitation(network: Network, ports: Sequence[RfPort]) -> Complex:
    """Return the right-hand sides for 1 V behind each port's impedance in turn, shape (m, p).

    Parameters
    ----------
    network : Network
        m unknowns.
    ports : sequence of RfPort
        p ports.
    """
    right = np.zeros((network.size, len(ports)), dtype=complex)
    for k, port in enumerate(ports):
        right[network.unknowns[f"i:{port.source}"], k] = 1.0
    return right


def scatter(network: Network, ports: Sequence[RfPort], x: Complex) -> Complex:
    """Turn solutions, shape (..., m, p), into S-parameters, shape (..., p, p)."""
    nodes = [network.unknowns[f"v:{port.node}"] for port in ports]
    return scatter_at_ports(ports, x[..., nodes, :])


def scatter_at_ports(ports: Sequence[RfPort], voltages: Complex) -> Complex:
    """Turn voltages at the ports, shape (..., p, p), into S-parameters of the same shape."""
    impedance = np.array([port.impedance for port in ports])
    scale = 2.0 * np.sqrt(impedance[None, :] / impedance[:, None])
    return np.asarray(voltages * scale - np.eye(len(ports)))


def solve_linear(matrices: Complex, right: Complex) -> Complex:
    """Solve a batch of linear systems.

    Parameters
    ----------
    matrices : ndarray, shape (..., m, m)
        The systems.
    right : ndarray, shape (m, p) or (..., m, p)
        Right-hand sides.

    Raises
    ------
    LinearisationError
        If one of them is singular.
    """
    try:
        return np.asarray(np.linalg.solve(matrices, right))
    except np.linalg.LinAlgError as error:
        raise LinearisationError(
            "circuit", "the linearised network is singular (a node without connection)"
        ) from error
