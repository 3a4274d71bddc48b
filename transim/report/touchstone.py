"""Touchstone files: S-parameters against frequency, by the open standard of the IBIS Open Forum, version 2.0."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np
import numpy.typing as npt

__all__ = ["touchstone_text"]

#: A line holds at most so many pairs of numbers, which readers of version 1 files expect as well.
_PAIRS = 4


def touchstone_text(
    frequency: npt.NDArray[np.float64],
    s: npt.NDArray[np.complex128],
    impedance: Sequence[float],
    comments: Sequence[str] = (),
) -> str:
    """Write S-parameters as a Touchstone 2.0 file.

    Parameters
    ----------
    frequency : ndarray, shape (n,)
        Increasing [Hz].
    s : ndarray of complex, shape (n, p, p)
        S from port j to port i at [:, i, j].
    impedance : sequence of float
        Reference of each of the p ports [ohm].
    comments : sequence of str
        Lines for its head, without line breaks.

    Returns
    -------
    str
        Real and imaginary parts in full precision, rows of the matrix in order (two ports: ``12_21``).

    Raises
    ------
    ValueError
        If the shapes do not fit together.
    """
    ports = len(impedance)
    if s.shape != (frequency.size, ports, ports):
        raise ValueError(f"S of shape {s.shape} does not fit {frequency.size} frequencies and {ports} ports")
    references = [f"{float(value)!r}" for value in impedance]
    lines = [
        # the standard knows ASCII alone
        *(f"! {comment}".encode("ascii", "replace").decode() for comment in comments),
        "[Version] 2.0",
        f"# Hz S RI R {references[0]}",
        f"[Number of Ports] {ports}",
        *(["[Two-Port Data Order] 12_21"] if ports == 2 else []),
        f"[Number of Frequencies] {frequency.size}",
        f"[Reference] {' '.join(references)}",
        "[Matrix Format] Full",
        "[Network Data]",
        *(line for k in range(frequency.size) for line in _matrix(float(frequency[k]), s[k])),
        "[End]",
    ]
    return "\n".join(lines) + "\n"


def _matrix(frequency: float, matrix: npt.NDArray[np.complex128]) -> Iterator[str]:
    """Write one matrix: two ports on one line, otherwise each row from a line of its own."""
    rows = [matrix.ravel()] if matrix.shape[0] <= 2 else list(matrix)
    head = f"{frequency!r} "
    for row in rows:
        pairs = [f"{float(value.real)!r} {float(value.imag)!r}" for value in row]
        for start in range(0, len(pairs), _PAIRS):
            yield head + " ".join(pairs[start : start + _PAIRS])
            head = ""
