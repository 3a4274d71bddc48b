"""From what a detector puts out to the voltage of the RF."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from transim.errors import MeasurementError
from transim.quantities import format_quantity

__all__ = ["KINDS", "Detector"]

Array = npt.NDArray[np.float64]
Kind = Literal["carrier", "linear", "square", "log"]

#: What the RF trace may be.
KINDS = ("carrier", "linear", "square", "log")


@dataclass(frozen=True)
class Detector:
    """The law of a detector.

    Parameters
    ----------
    kind : {"carrier", "linear", "square", "log"}
        ``carrier``: the RF itself, its magnitude taken by demodulation. ``linear``: output proportional to the RF
        voltage. ``square``: to its square. ``log``: to its level in dB.
    zero : float
        Output without RF of a linear or square-law detector [V].
    slope : float
        Of a logarithmic one, with its sign [V/dB].
    """

    kind: Kind
    zero: float = 0.0
    slope: float = 1.0

    def ratio(self, output: Array, full: float) -> Array:
        """Return the RF voltage as a share of another.

        Parameters
        ----------
        output : ndarray
            Output of the detector [V].
        full : float
            Its output at the other RF voltage [V].

        Returns
        -------
        ndarray
            Ratio of the RF voltages, 0 or more.

        Raises
        ------
        MeasurementError
            If the other voltage is none.
        """
        if self.kind == "log":
            return np.asarray(10.0 ** ((output - full) / (20.0 * self.slope)))
        span = full - self.zero
        if span == 0.0:
            raise MeasurementError(f"the detector's on level is its zero, {format_quantity(full, 'V')}: no RF passes")
        share = np.maximum((np.asarray(output) - self.zero) / span, 0.0)
        return np.asarray(np.sqrt(share) if self.kind == "square" else share)

    def output(self, ratio: Array, full: float) -> Array:
        """Return the output at an RF voltage, the inverse of `ratio`.

        Parameters
        ----------
        ratio : ndarray
            RF voltage as a share of that at `full`, above 0 for a logarithmic detector.
        full : float
            Output at a ratio of 1 [V].

        Returns
        -------
        ndarray
            Output [V].
        """
        if self.kind == "log":
            return np.asarray(full + 20.0 * self.slope * np.log10(ratio))
        power = 2 if self.kind == "square" else 1
        return np.asarray(self.zero + (full - self.zero) * ratio**power)
