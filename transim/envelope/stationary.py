"""S-parameters that ngspice's own AC analysis found, and their difference to the envelope solution."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from transim.circuit.netlist import RfPort
from transim.engine.rawfile import Plot
from transim.errors import RawFileError

__all__ = ["largest_difference", "level_of", "read_scattering"]

Complex = npt.NDArray[np.complex128]
#: Waves below -60 dB are noise of the check's own arithmetic; their decibels are not compared.
_FLOOR = 1e-3


def read_scattering(
    plots: Sequence[Plot],
    ports: Sequence[RfPort],
    frequencies: Sequence[float],
    entered: Sequence[int] | None = None,
) -> Complex:
    """Turn AC plots into S-parameters.

    Parameters
    ----------
    plots : sequence of Plot
        One for each excited port and frequency, frequency running fastest.
    ports : sequence of RfPort
        p ports.
    frequencies : sequence of float
        f frequencies [Hz].
    entered : sequence of int or None
        Places of the excited ports; None: all.

    Returns
    -------
    ndarray, shape (f, p, p)
        Columns of ports that are not excited are not a number.

    Raises
    ------
    RawFileError
        If the number of plots or a frequency is not what the deck asked for.
    """
    excited = range(len(ports)) if entered is None else entered
    if len(plots) != len(excited) * len(frequencies):
        raise RawFileError(f"expected {len(excited) * len(frequencies)} AC plots, found {len(plots)}")
    s = np.full((len(frequencies), len(ports), len(ports)), complex(np.nan, np.nan))
    for place, plot in enumerate(plots):
        number, k = divmod(place, len(frequencies))
        column = excited[number]
        found = float(plot["frequency"][0].real)
        if not np.isclose(found, frequencies[k], rtol=1e-6):
            raise RawFileError(f"expected an AC plot at {frequencies[k]:g} Hz, found one at {found:g} Hz")
        for row, port in enumerate(ports):
            scale = 2.0 * np.sqrt(ports[column].impedance / port.impedance)
            s[k, row, column] = scale * plot[f"v({port.node})"][0] - (row == column)
    return s


def level_of(matrix: Complex) -> npt.NDArray[np.float64]:
    """Return the levels of an S-matrix [dB], with a floor of -60 dB."""
    return np.asarray(20.0 * np.log10(np.abs(matrix) + _FLOOR))


def largest_difference(first: Complex, second: Complex) -> float:
    """Return the largest difference of two S-matrices [dB].

    Parameters
    ----------
    first, second : ndarray of complex, shape (p, p)
        The matrices; both get a floor of -60 dB. Columns of ports that `first` was not excited at are left out.
    """
    columns = np.flatnonzero(~np.isnan(first).all(axis=0))
    levels = [level_of(matrix[:, columns]) for matrix in (first, second)]
    return float(np.abs(levels[0] - levels[1]).max())
