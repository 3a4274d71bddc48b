"""The single p-n junction as SPICE has it: current, depletion capacitance and their temperature laws.

Equations: P. Antognetti, G. Massobrio, Semiconductor Device Modeling with SPICE, 1988, chapters 1 and 2;
the cubic law in reverse bias and the temperature laws follow the ngspice manual. Constants are ngspice's
own, so that a comparison with its operating point shows errors of form and not of the fifth digit of k/q.
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

__all__ = ["Array", "Depletion", "band_gap", "exponential", "saturation_factor", "thermal_voltage"]

Array = npt.NDArray[np.float64]

BOLTZMANN = 1.38064852e-23
CHARGE = 1.6021766208e-19
REFERENCE = 300.15
GMIN = 1e-12
#: ngspice raises a smaller saturation current to this (its option epsmin) [A].
SMALLEST = 1e-28


def thermal_voltage(kelvin: float) -> float:
    """Return kT/q [V] at an absolute temperature [K]."""
    return BOLTZMANN * kelvin / CHARGE


def band_gap(kelvin: float) -> float:
    """Return the band gap of silicon [eV] by Varshni's law, with SPICE's coefficients."""
    return 1.16 - 7.02e-4 * kelvin * kelvin / (kelvin + 1108.0)


def saturation_factor(kelvin: float, nominal: float, gap: float, exponent: float) -> float:
    """Return the logarithm of IS(T)/IS(Tnom) for an emission coefficient of one.

    Parameters
    ----------
    kelvin, nominal : float
        Junction and parameter temperature [K].
    gap, exponent : float
        EG [eV] and XTI.
    """
    ratio = kelvin / nominal
    return (ratio - 1.0) * gap / thermal_voltage(kelvin) + exponent * math.log(ratio)


def exponential(v: Array, scale: float, saturation: float) -> tuple[Array, Array]:
    """Return current [A] and conductance [S] of an ideal junction.

    Parameters
    ----------
    v : ndarray, shape (n,)
        Junction voltage, forward positive [V].
    scale : float
        N Vt [V].
    saturation : float
        Saturation current [A].

    Notes
    -----
    Below -3 N Vt SPICE goes over to a cubic that keeps value and slope continuous.
    """
    forward = v >= -3.0 * scale
    exponent = np.exp(np.where(forward, np.minimum(v / scale, 600.0), 0.0))
    reverse = (3.0 * scale / (np.where(forward, -1.0, v) * math.e)) ** 3
    current = np.where(forward, saturation * (exponent - 1.0), -saturation * (1.0 + reverse))
    slope = np.where(
        forward, saturation * exponent / scale, saturation * 3.0 * reverse / np.where(forward, -1.0, v)
    )
    return current, slope


class Depletion:
    """Depletion capacitance C(v) = CJ (1 - v/VJ)^-M, continued linearly above FC VJ.

    Parameters
    ----------
    zero_bias, potential, grading, limit : float
        CJ [F], VJ [V], M and FC at the nominal temperature.
    kelvin, nominal : float
        Junction and parameter temperature [K].
    """

    def __init__(
        self,
        zero_bias: float,
        potential: float,
        grading: float,
        limit: float,
        *,
        kelvin: float,
        nominal: float,
    ) -> None:
        ratio, shift = _potential_law(nominal)
        reference = (potential - shift) / ratio
        at_nominal = (potential - reference) / reference
        capacitance = zero_bias / (1.0 + grading * (400e-6 * (nominal - REFERENCE) - at_nominal))
        ratio, shift = _potential_law(kelvin)
        self.potential = ratio * reference + shift
        at_kelvin = (self.potential - reference) / reference
        self.zero_bias = capacitance * (1.0 + grading * (400e-6 * (kelvin - REFERENCE) - at_kelvin))
        self.grading = grading
        self.limit = limit

    def capacitance(self, v: Array) -> Array:
        """Return the capacitance [F] at junction voltage `v` [V], shape (n,)."""
        corner = self.limit * self.potential
        below = v < corner
        power = (1.0 - np.where(below, v, 0.0) / self.potential) ** -self.grading
        offset = 1.0 - self.limit * (1.0 + self.grading) + self.grading * v / self.potential
        above = offset / (1.0 - self.limit) ** (1.0 + self.grading)
        return np.asarray(self.zero_bias * np.where(below, power, above))


def _potential_law(kelvin: float) -> tuple[float, float]:
    """Return factor and shift by which a built-in potential at 300.15 K becomes that at `kelvin`."""
    ratio = kelvin / REFERENCE
    gap = -band_gap(kelvin) / (2.0 * BOLTZMANN * kelvin / CHARGE) + 1.1150877 / (
        2.0 * thermal_voltage(REFERENCE)
    )
    return ratio, -2.0 * thermal_voltage(kelvin) * (1.5 * math.log(ratio) + gap)
