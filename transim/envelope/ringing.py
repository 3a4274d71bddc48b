"""Ringing solution: d/dt kept, integrated on the video run's own time points.

BDF2 with variable step (C. W. Gear, Numerical Initial Value Problems in Ordinary Differential Equations, 1971) damps
the modes near -j w that a trapezoidal rule would keep.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from transim.circuit.assemble import RfPort
from transim.envelope.junction import Array
from transim.envelope.network import Network
from transim.envelope.scatter import Complex, Scattering, excitation, scatter, solve_linear

__all__ = ["solve_ringing"]

#: Largest change of an entry in one step. A capacitance that falls by orders of magnitude in one step of the
#: video run would otherwise leave its charge behind as a voltage that no circuit has.
_SHARE = 0.25


def solve_ringing(network: Network, ports: Sequence[RfPort], frequency: Sequence[float]) -> Scattering:
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
    samples = network.time
    network = network.refined(_SHARE)
    right = excitation(network, ports)
    omega = 2j * np.pi * np.asarray(frequency, dtype=float)[:, None, None]
    time = network.time

    def at(point: int) -> tuple[Complex, Complex]:
        g = network.constant_g.astype(complex)
        c = network.constant_c.astype(complex)
        g[network.rows, network.columns] += network.varying_g[point]
        c[network.rows, network.columns] += network.varying_c[point]
        return g, c

    first = np.stack([network.constant(complex(w)) for w in omega[:, 0, 0]])
    first[:, network.rows, network.columns] += network.varying_g[0] + omega[:, :, 0] * network.varying_c[0]
    x = solve_linear(first, right)
    capacitance = at(0)[1]
    past = _Past(network, omega, x)
    s = np.empty((len(frequency), time.size, len(ports), len(ports)), dtype=complex)
    s[:, 0] = scatter(network, ports, x)
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
        matrix, known = past.delayed(conductance + (omega + lead) * capacitance, point)
        x = solve_linear(matrix, right + one * charge[0] + two * charge[1] - known)
        past.keep(point, x)
        s[:, point] = scatter(network, ports, x)
        charge = [capacitance @ x, charge[0]]
        previous_step = step
    averaged = np.stack([_average(time, s[k], 1.0 / carrier, samples) for k, carrier in enumerate(frequency)])
    return Scattering(samples, np.asarray(frequency, dtype=float), averaged, "ringing")


class _Past:
    """Solutions so far, for what acts on them after a delay: the far ends of lines."""

    def __init__(self, network: Network, omega: Complex, first: Complex) -> None:
        self._network = network
        self._factors = [
            (entry, entry.coefficient * np.exp(-omega[:, 0, 0] * entry.delay)) for entry in network.delays
        ]
        # without lines nothing is kept
        points = network.time.size if network.delays else 1
        self._x = np.empty((points, *first.shape), dtype=complex)
        self._x[0] = first

    def keep(self, point: int, x: Complex) -> None:
        if self._network.delays:
            self._x[point] = x

    def delayed(self, matrix: Complex, point: int) -> tuple[Complex, Complex]:
        """Return matrix and known part of one step's delayed terms, shape (f, m, m) and (f, m, p)."""
        if not self._factors:
            return matrix, np.zeros(1, dtype=complex)
        time, known = self._network.time, np.zeros_like(self._x[0])
        matrix = matrix.copy()
        for entry, factor in self._factors:
            at = time[point] - entry.delay
            if at <= time[0]:
                known[:, entry.row] += factor[:, None] * self._x[0][:, entry.column]
                continue
            after = min(int(np.searchsorted(time, at)), point)
            share = (at - time[after - 1]) / (time[after] - time[after - 1])
            known[:, entry.row] += (1.0 - share) * factor[:, None] * self._x[after - 1][:, entry.column]
            if after == point:
                # a delay shorter than the step: the far end depends on the step's own solution
                matrix[:, entry.row, entry.column] += share * factor
            else:
                known[:, entry.row] += share * factor[:, None] * self._x[after][:, entry.column]
        return matrix, known


def _average(time: Array, s: Complex, width: float, samples: Array) -> Complex:
    """Return the mean of S, shape (n, p, p), over a width [s] around each sample.

    What moves within one carrier period is no envelope: where a junction lets go in less, the exact solution is a
    spike (RF shifts the instant of the step), which a carrier-resolved extraction averages in the same way.
    """
    area = np.zeros_like(s)
    area[1:] = np.cumsum(0.5 * (s[1:] + s[:-1]) * np.diff(time)[:, None, None], axis=0)
    first, last = np.maximum(samples - width / 2.0, time[0]), np.minimum(samples + width / 2.0, time[-1])
    mean = np.empty((samples.size, *s.shape[1:]), dtype=complex)
    for row in range(s.shape[1]):
        for column in range(s.shape[2]):
            sums = [_integral(time, s[:, row, column], area[:, row, column], end) for end in (first, last)]
            mean[:, row, column] = (sums[1] - sums[0]) / (last - first)
    return mean


def _integral(time: Array, value: Complex, area: Complex, end: Array) -> Complex:
    """Return the integral of a piecewise-linear waveform from its start to each end [s]."""
    place = np.clip(np.searchsorted(time, end, side="right") - 1, 0, time.size - 2)
    inside = end - time[place]
    slope = (value[place + 1] - value[place]) / (time[place + 1] - time[place])
    return np.asarray(area[place] + inside * (value[place] + 0.5 * slope * inside))
