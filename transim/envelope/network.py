"""A circuit as a time-varying linear network: unknowns, matrices, and what of them changes.

Unknowns are node voltages and branch currents, as in modified nodal analysis (C. W. Ho, A. E. Ruehli,
P. A. Brennan, IEEE Trans. Circuits Syst. 22(6), 1975). With x the complex envelope at the carrier w, the network is::

    d/dt(C(t) x) + (G(t) + j w C(t)) x = s

Lossless lines add entries that act on x as it was one delay ago.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from transim.envelope.junction import Array

__all__ = ["Delay", "InnerJunction", "Network"]

#: Entries far below these are no load to a 50 ohm line at any carrier [S, F].
_SMALL_G = 1e-8
_SMALL_C = 1e-17


@dataclass(frozen=True)
class InnerJunction:
    """A p-n junction inside a device, and where its RF voltage stands among the unknowns.

    Attributes
    ----------
    device : str
        Flattened name.
    plus, minus : int
        Places of its nodes in x; -1 is ground.
    scale : float
        N Vt [V]: an RF voltage well below it leaves the junction linear.
    current : ndarray, shape (n,)
        Slope times `scale`: its exponential current along the bias (of a transistor, the base's share) [A].
    """

    device: str
    plus: int
    minus: int
    scale: float
    current: Array


@dataclass(frozen=True)
class Delay:
    """An entry of the matrix that acts on an unknown as it was some time ago, as a line's far end does.

    Attributes
    ----------
    row, column : int
        Place of the entry.
    coefficient : float
        Its value without the delay.
    delay : float
        [s].
    """

    row: int
    column: int
    coefficient: float
    delay: float


@dataclass(frozen=True)
class Network:
    """Matrices of the linear time-varying network.

    Attributes
    ----------
    unknowns : mapping of str to int
        ``v:node`` and ``i:source`` to the place in x.
    constant_g, constant_c : ndarray, shape (m, m)
        Parts of G and C that do not change with time.
    rows, columns : ndarray of int, shape (k,)
        Places that change with time.
    varying_g, varying_c : ndarray, shape (n, k)
        What is added there, for each time point.
    time : ndarray, shape (n,)
        Time of the points [s].
    junctions : tuple of InnerJunction
        The p-n junctions of all devices.
    delays : tuple of Delay
        Entries of lossless lines.
    """

    unknowns: Mapping[str, int]
    constant_g: Array
    constant_c: Array
    rows: npt.NDArray[np.intp]
    columns: npt.NDArray[np.intp]
    varying_g: Array
    varying_c: Array
    time: Array
    junctions: tuple[InnerJunction, ...] = ()
    delays: tuple[Delay, ...] = ()

    def constant(self, omega: complex) -> npt.NDArray[np.complex128]:
        """Return the part of the matrix that does not change with time, shape (m, m).

        Parameters
        ----------
        omega : complex
            j w [rad/s].
        """
        matrix = self.constant_g + omega * self.constant_c
        for entry in self.delays:
            matrix[entry.row, entry.column] += entry.coefficient * np.exp(-omega * entry.delay)
        return np.asarray(matrix, dtype=complex)

    @property
    def size(self) -> int:
        """Number of unknowns."""
        return len(self.unknowns)

    def at(self, points: npt.NDArray[np.intp]) -> Network:
        """Return the same network at some of its time points only."""
        junctions = tuple(replace(junction, current=junction.current[points]) for junction in self.junctions)
        return replace(
            self,
            varying_g=self.varying_g[points],
            varying_c=self.varying_c[points],
            time=self.time[points],
            junctions=junctions,
        )

    def scaled_changes(self) -> Array:
        """Return every entry that changes on a scale where equal distances are equal shares, shape (n, k or less).

        Entries too small to load a 50 ohm line at any carrier are linear on it, so that their shares do not count.
        """
        total_g = self.constant_g[self.rows, self.columns] + self.varying_g
        total_c = self.constant_c[self.rows, self.columns] + self.varying_c
        scaled = np.arcsinh(np.concatenate([total_g / _SMALL_G, total_c / _SMALL_C], axis=1))
        return np.asarray(scaled[:, np.ptp(scaled, axis=0) > 0.0])

    def refined(self, share: float, counted: npt.NDArray[np.bool_]) -> tuple[Network, Array]:
        """Return the network with points added wherever an entry changes by more than a share from one to the next.

        Parameters
        ----------
        share : float
            Largest relative change between neighbours.
        counted : ndarray of bool, shape (n - 1,)
            The steps that are looked at.

        Returns
        -------
        Network
            At the points as they were and between them.
        ndarray, shape (k,)
            Place of each of its points, in steps of the n points.
        """
        jumps = np.abs(np.diff(self.scaled_changes(), axis=0)).max(axis=1, initial=0.0) * counted
        parts = np.maximum(1, np.ceil(jumps / share)).astype(int)
        step, before = np.repeat(np.arange(parts.size), parts), np.repeat(np.cumsum(parts) - parts, parts)
        position = np.concatenate([[0.0], step + (np.arange(step.size) - before + 1) / parts[step]])
        if position.size == self.time.size:
            return replace(self, junctions=()), position
        place = np.arange(self.time.size)
        varying = []
        for values, small in ((self.varying_g, _SMALL_G), (self.varying_c, _SMALL_C)):
            scaled = np.arcsinh(values / small)
            between = [np.interp(position, place, column) for column in scaled.T]
            varying.append(small * np.sinh(np.stack(between, axis=1)) if between else np.zeros((position.size, 0)))
        time = np.interp(position, place, self.time)
        return replace(self, varying_g=varying[0], varying_c=varying[1], time=time, junctions=()), position
