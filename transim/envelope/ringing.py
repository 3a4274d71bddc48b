"""Ringing solution: d/dt kept, integrated on time points of the video run, as many as the solution needs.

BDF2 with variable step (C. W. Gear, Numerical Initial Value Problems in Ordinary Differential Equations, 1971) damps
the modes near -j w that a trapezoidal rule would keep.
"""

from __future__ import annotations

import bisect
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from transim.circuit.netlist import RfPort
from transim.envelope.average import period_average
from transim.envelope.junction import Array
from transim.envelope.memoryless import without_memoryless
from transim.envelope.network import Network
from transim.envelope.scatter import Complex, Scattering, excitation, scatter_at_ports, solve_linear

__all__ = ["solve_ringing"]

#: Largest change of an entry in one step. A capacitance that falls by orders of magnitude in one step of the
#: video run would otherwise leave its charge behind as a voltage that no circuit has.
_SHARE = 0.25
#: Furthest that a solution may be from a straight line through the last two, in V for 1 V of a source; else the step
#: is halved. The step's own error, of third order, is far smaller.
_BEND = 2e-4
#: Change of a frozen S that counts as none, and largest way of it, back and forth included, that one step spans.
_STILL, _MOVE = 1e-4, 0.02
#: Share of a step's change that has to come in the first half of its time.
_FIRST_HALF = 0.1


def solve_ringing(
    network: Network, ports: Sequence[RfPort], frequency: Sequence[float], frozen: Complex
) -> Scattering:
    """Integrate the network's own transients at the carrier, from the stationary state of the first point.

    Parameters
    ----------
    network : Network
        n time points.
    ports : sequence of Port
        p ports.
    frequency : sequence of float
        f carriers [Hz].
    frozen : ndarray, shape (f, n, p, p)
        The frozen solution; where it stands still, entries that change are none that the RF sees.

    Returns
    -------
    Scattering

    Raises
    ------
    LinearisationError
        If the network is singular.
    """
    samples = network.time
    moves = np.abs(np.diff(frozen, axis=1)).max(axis=(0, 2, 3), initial=0.0)
    network, position = network.refined(_SHARE, moves > _STILL)
    moved = np.interp(position, np.arange(samples.size), np.concatenate([[0.0], np.cumsum(moves)]))
    network, right = without_memoryless(network, excitation(network, ports), [f"v:{port.node}" for port in ports])
    omega = 2j * np.pi * np.asarray(frequency, dtype=float)[:, None, None]
    nodes = [network.unknowns[f"v:{port.node}"] for port in ports]
    points, voltages = _integrate(network, right, omega, nodes, _Stretch(network.time, moved))
    instants, s = network.time[points], scatter_at_ports(ports, np.stack(voltages, axis=1))
    averaged = np.stack([period_average(instants, s[k], 1.0 / carrier, samples) for k, carrier in enumerate(frequency)])
    return Scattering(samples, np.asarray(frequency, dtype=float), averaged, "ringing")


def _integrate(
    network: Network, right: Complex, omega: Complex, nodes: Sequence[int], stretch: _Stretch
) -> tuple[list[int], list[Complex]]:
    """Return the points that the steps went to, and the solution at some nodes at each, shape (f, k, p)."""
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
    volts = [place for name, place in network.unknowns.items() if name.startswith("v:")]
    past = _Past(network, omega, x)
    now = before = _State(0, x, at(0)[1] @ x)
    points, voltages = [0], [x[:, nodes]]
    while now.point < time.size - 1:
        point = stretch.target(now.point)
        step, previous = float(time[point] - time[now.point]), float(time[now.point] - time[before.point])
        ratio = step / previous if previous > 0.0 else 0.0
        # variable-step BDF2; ratio 0 is the implicit Euler step that starts it
        lead = (1.0 + 2.0 * ratio) / (1.0 + ratio) / step
        one = (1.0 + ratio) / step
        two = -ratio * ratio / (1.0 + ratio) / step
        conductance, capacitance = at(point)
        matrix, known = past.delayed(conductance + (omega + lead) * capacitance, float(time[point]))
        x = solve_linear(matrix, right + one * now.charge + two * before.charge - known)
        # against a straight line through the last two: what the step cannot have seen shows here
        bend = (x - now.x - ratio * (now.x - before.x))[:, volts]
        if stretch.refused(float(np.abs(bend).max(initial=0.0))):
            continue
        past.keep(float(time[point]), x)
        now, before = _State(point, x, capacitance @ x), now
        points.append(point)
        voltages.append(x[:, nodes])
    return points, voltages


@dataclass(frozen=True)
class _State:
    """Solution x and charge C x at a point."""

    point: int
    x: Complex
    charge: Complex


class _Stretch:
    """How many points of the video run one step may span: lines make ngspice step far finer than anything moves."""

    def __init__(self, time: Array, moved: Array) -> None:
        self._time, self._moved = time, moved
        self._points = 1
        self._at = 0

    def target(self, point: int) -> int:
        """Return the point that the next step goes to; the frozen S moves little on the way."""
        allowed = int(np.searchsorted(self._moved, self._moved[point] + _MOVE, side="right")) - 1
        self._at = point
        self._to = self._before_change(point, min(point + self._points, max(allowed, point + 1), self._moved.size - 1))
        return self._to

    def _before_change(self, point: int, to: int) -> int:
        """Shorten a step over a rest and the change after it: S is a straight line between its ends."""
        time, moved = self._time, self._moved
        while to > point + 1 and moved[to] - moved[point] > _STILL:
            middle = int(np.searchsorted(time, 0.5 * (time[point] + time[to]), side="right")) - 1
            if moved[middle] - moved[point] >= _FIRST_HALF * (moved[to] - moved[point]):
                break
            to = max(middle, point + 1)
        return to

    def refused(self, bend: float) -> bool:
        """Tell whether the step was too long, and set the length of the next."""
        taken = self._to - self._at
        if bend > _BEND and taken > 1:
            self._points = taken // 2
            return True
        self._points = 2 * taken if bend < _BEND / 4.0 else taken
        return False


class _Past:
    """Solutions so far, for what acts on them after a delay: the far ends of lines."""

    def __init__(self, network: Network, omega: Complex, first: Complex) -> None:
        self._factors = [
            (entry, entry.coefficient * np.exp(-omega[:, 0, 0] * entry.delay)) for entry in network.delays
        ]
        self._columns = sorted({entry.column for entry in network.delays})
        self._time = [float(network.time[0])]
        self._x = [first[:, self._columns]]

    def keep(self, time: float, x: Complex) -> None:
        """Remember a solution."""
        if self._factors:
            self._time.append(time)
            self._x.append(x[:, self._columns])

    def delayed(self, matrix: Complex, time: float) -> tuple[Complex, Complex]:
        """Return matrix and known part of one step's delayed terms, shape (f, m, m) and (f, m, p)."""
        if not self._factors:
            return matrix, np.zeros(1, dtype=complex)
        known = np.zeros((*matrix.shape[:2], self._x[0].shape[2]), dtype=complex)
        matrix = matrix.copy()
        for entry, factor in self._factors:
            column, at = self._columns.index(entry.column), time - entry.delay
            if at <= self._time[0]:
                known[:, entry.row] += factor[:, None] * self._x[0][:, column]
                continue
            after = bisect.bisect_left(self._time, at)
            start = self._time[after - 1]
            stop = self._time[after] if after < len(self._time) else time
            share = (at - start) / (stop - start)
            known[:, entry.row] += (1.0 - share) * factor[:, None] * self._x[after - 1][:, column]
            if after == len(self._time):
                # a delay shorter than the step: the far end depends on the step's own solution
                matrix[:, entry.row, entry.column] += share * factor
            else:
                known[:, entry.row] += share * factor[:, None] * self._x[after][:, column]
        return matrix, known
