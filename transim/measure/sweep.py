"""Settled states against frequency, and against the holding current."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

__all__ = ["BiasSweep", "State", "StaticSweep", "attenuation"]

Array = npt.NDArray[np.float64]
Complex = npt.NDArray[np.complex128]
State = Literal["on", "off"]
#: Smallest magnitude that has decibels; less is written as 400 dB.
_SMALLEST = 1e-20


def attenuation(s: Complex) -> Array:
    """Return -20 log10 of the magnitude.

    Parameters
    ----------
    s : ndarray of complex
        S-parameters.

    Returns
    -------
    ndarray of float
        Positive for a loss [dB]; 400 dB where nothing passes.
    """
    return -20.0 * np.log10(np.maximum(np.abs(s), _SMALLEST)) + 0.0


@dataclass(frozen=True)
class StaticSweep:
    """S-parameters of both settled states against frequency.

    Attributes
    ----------
    frequency : ndarray, shape (n,)
        Increasing [Hz].
    on, off : ndarray of complex, shape (n, p, p)
        S of the state that lets RF pass, and of the one that blocks it.
    ports : tuple of str
        Names of the p ports.
    through : tuple of int
        Places of the two ports whose transmission counts (from, to).
    impedance : float
        Reference of every port [ohm].
    """

    frequency: Array
    on: Complex
    off: Complex
    ports: tuple[str, ...]
    through: tuple[int, int]
    impedance: float

    @property
    def insertion_loss(self) -> Array:
        """Loss of the through pair, on, shape (n,) [dB]."""
        return attenuation(self.on[:, self.through[1], self.through[0]])

    @property
    def isolation(self) -> Array:
        """Attenuation of the through pair, off, shape (n,) [dB]."""
        return attenuation(self.off[:, self.through[1], self.through[0]])

    @property
    def pair(self) -> tuple[str, ...]:
        """The two ports of the through pair, in the order of the ports."""
        return tuple(self.ports[place] for place in sorted(self.through))

    def return_loss(self, state: State) -> Array:
        """Return the return loss of every port.

        Parameters
        ----------
        state : {"on", "off"}
            Which settled state.

        Returns
        -------
        ndarray, shape (n, p)
            Positive for a passive circuit [dB].
        """
        s = self.on if state == "on" else self.off
        return attenuation(np.diagonal(s, axis1=1, axis2=2))

    def figures(self) -> Mapping[str, Array]:
        """Return what the limits of a design may hold, by metric.

        Returns
        -------
        mapping of str to ndarray, shape (n, k)
            ``insertion_loss`` and ``isolation`` of the through pair (k = 1), ``return_loss_on`` and
            ``return_loss_off`` of its two ports (k = 2, as `pair` names them) [dB].
        """
        places = sorted(self.through)
        return {
            "insertion_loss": self.insertion_loss[:, np.newaxis],
            "isolation": self.isolation[:, np.newaxis],
            "return_loss_on": self.return_loss("on")[:, places],
            "return_loss_off": self.return_loss("off")[:, places],
        }


@dataclass(frozen=True)
class BiasSweep:
    """The switch as an attenuator that its holding current sets, without a driver.

    Attributes
    ----------
    temperature : float
        [degC].
    carriers : tuple of float
        f carriers [Hz].
    current : ndarray, shape (n,)
        Into the bias entry [A].
    voltage : ndarray, shape (n,)
        At the bias entry [V].
    attenuation : ndarray, shape (n, f)
        -20 log10 |S| of the through pair [dB].
    charge : mapping of str to ndarray, shape (n,)
        Stored in each junction [C], by its name in the path.
    throw : str
        Its name; empty where the path has a single way.
    """

    temperature: float
    carriers: tuple[float, ...]
    current: Array
    voltage: Array
    attenuation: Array
    charge: Mapping[str, Array]
    throw: str = ""
