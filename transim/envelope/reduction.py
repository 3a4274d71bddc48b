"""A network reduced to what its changing entries touch: all else is eliminated once for all time points.

An equation and an unknown can be eliminated together where neither has an entry that changes. Equations and unknowns
are chosen by complete pivoting (G. H. Golub, C. F. Van Loan, Matrix Computations, section on Gaussian elimination), so
that they need not stand at equal places: of a source that is controlled by a changing voltage only one equation stays.
"""

from __future__ import annotations

import contextlib

import numpy as np
import numpy.typing as npt

from transim.envelope.network import Network
from transim.envelope.scatter import Complex, solve_linear
from transim.errors import LinearisationError

__all__ = ["Reduction", "complete_pivots", "scaled_to_one"]

Places = npt.NDArray[np.intp]

#: Time points solved at once: bounds the memory of a batch.
_BATCH = 2048
#: A pivot smaller than this, every row and column scaled to one, ends the elimination.
_SMALLEST = 1e-6
#: A difference to the whole system's solution above this, relative to its largest unknown, shows lost digits.
_LOST = 1e-9
#: Share of a carrier within which what was proved at it holds.
_NEAR = 1e-2


class Reduction:
    """Which equations and unknowns of a network are eliminated, and the solution of what is left.

    Parameters
    ----------
    network : Network
        m unknowns; a network of other time points of the same circuit may be solved with the same choice.
    omega : complex
        j w at which the pivots are compared [rad/s].
    """

    def __init__(self, network: Network, omega: complex) -> None:
        free_rows, free_columns = _others(network.size, network.rows), _others(network.size, network.columns)
        scaled = scaled_to_one(network.constant(omega))
        rows, columns = complete_pivots(scaled[np.ix_(free_rows, free_columns)])
        self._choice = _Choice(network, free_rows[rows], free_columns[columns])
        self._proved: list[complex] = []

    def solve(self, network: Network, right: Complex, omega: complex, wanted: Places | None = None) -> Complex:
        """Solve the network at every time point.

        Parameters
        ----------
        network : Network
            n time points, m unknowns.
        right : ndarray of complex, shape (m, p)
            Right-hand sides.
        omega : complex
            j w [rad/s].
        wanted : ndarray of int, shape (k,), or None
            Places of the unknowns to be returned; None: all m.

        Returns
        -------
        ndarray of complex, shape (n, k, p)

        Raises
        ------
        LinearisationError
            If the network is singular.
        """
        wanted = np.arange(network.size) if wanted is None else wanted
        every = np.arange(network.time.size)
        if self._choice.rows.size:
            with contextlib.suppress(LinearisationError):
                small = _Eliminated(network, right, omega, self._choice)
                if self._proves(small, network, right, omega):
                    return small.solve(every, wanted)
        none = np.array([], dtype=np.intp)
        return _Eliminated(network, right, omega, _Choice(network, none, none)).solve(every, wanted)

    def _proves(self, small: _Eliminated, network: Network, right: Complex, omega: complex) -> bool:
        """Tell whether elimination keeps all digits that count, as it does near a carrier at which it did."""
        if any(abs(omega - proved) <= _NEAR * abs(proved) for proved in self._proved):
            return True
        some = np.unique([0, network.time.size // 2, network.time.size - 1])
        matrices = np.repeat(network.constant(omega)[None], some.size, axis=0)
        matrices[:, network.rows, network.columns] += network.varying_g[some] + omega * network.varying_c[some]
        whole = solve_linear(matrices, right)
        if not np.abs(small.solve(some, np.arange(network.size)) - whole).max() <= _LOST * np.abs(whole).max():
            return False
        self._proved.append(omega)
        return True


class _Choice:
    """Equations and unknowns that are eliminated, those that stay, and where the changing entries are among these."""

    def __init__(self, network: Network, rows: Places, columns: Places) -> None:
        self.rows, self.columns = rows, columns
        self.equations, self.kept = _others(network.size, rows), _others(network.size, columns)
        self.places = np.searchsorted(self.equations, network.rows), np.searchsorted(self.kept, network.columns)
        self.gone = np.ix_(rows, columns)
        self.beside = np.ix_(rows, self.kept)
        self.below = np.ix_(self.equations, columns)
        self.small = np.ix_(self.equations, self.kept)


class _Eliminated:
    """The small systems at one carrier, and the way back to all unknowns."""

    def __init__(self, network: Network, right: Complex, omega: complex, choice: _Choice) -> None:
        matrix = network.constant(omega)
        self._network, self._omega, self._choice = network, omega, choice
        beside = np.concatenate([matrix[choice.beside], right[choice.rows]], axis=1)
        inner = solve_linear(matrix[choice.gone], beside) if choice.rows.size else beside
        # what is eliminated is `fixed` less `back` times what is kept
        self._back, self._fixed = inner[:, : choice.kept.size], inner[:, choice.kept.size :]
        below = matrix[choice.below]
        self._small = matrix[choice.small] - below @ self._back
        self._right = right[choice.equations] - below @ self._fixed

    def solve(self, points: Places, wanted: Places) -> Complex:
        """Return wanted unknowns at some points, shape (n, k, p)."""
        weights, fixed = self._expansion(wanted)
        found = np.empty((points.size, wanted.size, self._right.shape[1]), dtype=complex)
        for first in range(0, points.size, _BATCH):
            batch = slice(first, first + _BATCH)
            found[batch] = weights @ self._kept_unknowns(points[batch]) + fixed
        return found

    def _kept_unknowns(self, points: Places) -> Complex:
        network = self._network
        matrices = np.repeat(self._small[None], points.size, axis=0)
        matrices[:, *self._choice.places] += network.varying_g[points] + self._omega * network.varying_c[points]
        return solve_linear(matrices, self._right)

    def _expansion(self, wanted: Places) -> tuple[Complex, Complex]:
        """Return factors, shape (k, kept), and constants, shape (k, p), that make unknowns of those that are kept."""
        choice = self._choice
        factors = np.zeros((self._network.size, choice.kept.size), dtype=complex)
        constants = np.zeros((self._network.size, self._right.shape[1]), dtype=complex)
        factors[choice.kept, np.arange(choice.kept.size)] = 1.0
        factors[choice.columns], constants[choice.columns] = -self._back, self._fixed
        return factors[wanted], constants[wanted]


def _others(size: int, places: Places) -> Places:
    """Return the places below a size that are not among some."""
    free = np.ones(size, dtype=bool)
    free[places] = False
    return np.flatnonzero(free)


def scaled_to_one(matrix: Complex) -> npt.NDArray[np.complex128]:
    """Return a matrix with the largest entry of each row, then of each column, scaled to one."""
    for axis in (1, 0):
        largest = np.abs(matrix).max(axis=axis, keepdims=True)
        matrix = matrix / np.where(largest > 0.0, largest, 1.0)
    return matrix


def complete_pivots(block: Complex) -> tuple[Places, Places]:
    """Return rows and columns that complete pivoting eliminates, until the pivots become too small."""
    rows: list[int] = []
    columns: list[int] = []
    while len(rows) < min(block.shape):
        size = np.abs(block)
        row, column = divmod(int(size.argmax()), block.shape[1])
        if not size[row, column] >= _SMALLEST:
            break
        rows.append(row)
        columns.append(column)
        block = block - block[:, column, None] * (block[row] / block[row, column])
        block[row, :] = 0.0
        block[:, column] = 0.0
    return np.array(rows, dtype=np.intp), np.array(columns, dtype=np.intp)
