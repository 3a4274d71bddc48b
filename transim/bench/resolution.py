"""How long the pieces of a noisy trace are that one parabola describes.

The trace is halved again and again; two halves are kept as one piece where a parabola over both costs less in squares
of the noise than two parabolas and the price of three more numbers do (penalised recursive dyadic partition). The
price grows with the number of places where a short piece could stand, so that noise alone makes no short pieces.
The search costs about as much as reading the trace twice.

References
----------
D. L. Donoho, "CART and best-ortho-basis: a connection", Annals of Statistics 25(5), 1870-1911, 1997 (dyadic partition
with a complexity penalty; from memory, the form of the penalty here is our own).
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

__all__ = ["piece_lengths"]

Array = npt.NDArray[np.float64]

#: Price of a piece in units of the noise variance, for one as long as the trace.
_PRICE = 9.0
#: Positions of the halving grid over which lengths are averaged.
_SHIFTS = (0.0, 0.2371, 0.4113, 0.6473)


def piece_lengths(rows: Array, variance: Array) -> Array:
    """Return the length of the piece that each sample belongs to.

    Parameters
    ----------
    rows : ndarray, shape (c, n)
        Real components of the trace.
    variance : ndarray, shape (n,)
        Variance of the noise in each component.

    Returns
    -------
    ndarray, shape (n,)
        Lengths in samples, the geometric mean over four positions of the halving grid.
    """
    count = rows.shape[1]
    rows = rows - rows.mean(axis=1, keepdims=True)
    total = np.zeros(count)
    for shift in _SHIFTS:
        offset = int(shift * count)
        mirrored = np.concatenate([rows[:, :offset][:, ::-1], rows], axis=1)
        spread = np.concatenate([variance[:offset][::-1], variance])
        total += np.log(_partition(mirrored, spread)[offset:])
    return np.asarray(np.exp(total / len(_SHIFTS)))


def _partition(rows: Array, variance: Array) -> Array:
    count = rows.shape[1]
    size = 1 << max(3, math.ceil(math.log2(count)))
    rows = np.pad(rows, ((0, 0), (0, size - count)), mode="symmetric")
    spread = np.pad(variance, (0, size - count), mode="symmetric")
    # moments about the middle of each piece
    first, second, third = rows, np.zeros_like(rows), np.zeros_like(rows)
    squares = (rows * rows).sum(axis=0)
    cost = np.full(size, _price(1, count))
    kept = [np.ones(size, dtype=bool)]
    length = 1
    while length < size:
        shift = length / 2.0
        (a0, b0), (a1, b1), (a2, b2) = ((part[:, ::2], part[:, 1::2]) for part in (first, second, third))
        first = a0 + b0
        second = a1 + b1 + shift * (b0 - a0)
        third = a2 + b2 + 2.0 * shift * (b1 - a1) + shift * shift * first
        squares, spread = squares[::2] + squares[1::2], spread[::2] + spread[1::2]
        length *= 2
        one = _misfit(squares, (first, second, third), length) * length / spread + _price(length, count)
        two = cost[::2] + cost[1::2]
        kept.append(one <= two)
        cost = np.minimum(one, two)
    lengths = np.zeros(1)
    for level in range(len(kept) - 1, -1, -1):
        lengths = np.where(lengths > 0.0, lengths, np.where(kept[level], float(1 << level), 0.0))
        if level:
            lengths = np.repeat(lengths, 2)
    return lengths[:count]


def _price(length: int, count: int) -> float:
    return _PRICE + 2.0 * math.log(max(1.0, count / length / 32.0))


def _misfit(squares: Array, moments: tuple[Array, Array, Array], length: int) -> Array:
    """Return the sum of squares around the parabola of least squares, by the discrete Legendre polynomials."""
    zeroth, first, second = moments
    m = float(length)
    rest = squares - (zeroth**2).sum(axis=0) / m - (first**2).sum(axis=0) * 12.0 / (m * (m * m - 1.0))
    if length > 2:
        bend = second - (m * m - 1.0) / 12.0 * zeroth
        rest = rest - (bend**2).sum(axis=0) * 180.0 / (m * (m * m - 1.0) * (m * m - 4.0))
    return np.asarray(np.maximum(rest, 0.0))
