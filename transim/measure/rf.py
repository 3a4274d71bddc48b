"""The RF's own voltages and currents in the junctions, as the metrics want them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from transim.measure.waveform import Waveform

__all__ = ["JunctionRf", "LargeSignal", "RfStress"]


@dataclass(frozen=True)
class JunctionRf:
    """One junction in one settled state.

    Parameters
    ----------
    junction : str
        Instance in the path.
    state : str
        ``on`` or ``off``: whether RF passes.
    off : bool
        Whether the junction itself is off (not forward biased).
    voltage, current : float
        RF peak voltage across it [V] and current into it [A], at the stated level.
    reverse : float
        Reverse bias, positive when reverse [V].
    charge : float or None
        Stored charge [C].
    width : float or None
        Width of its I-region, if its part has one [m].
    """

    junction: str
    state: str
    off: bool
    voltage: float
    current: float
    reverse: float
    charge: float | None
    width: float | None


@dataclass(frozen=True)
class RfStress:
    """Everything that the RF does at one level, by the small-signal solution.

    Parameters
    ----------
    level : float
        Available power of the source [dBm].
    junctions : tuple of JunctionRf
        Every junction in both settled states.
    modulation : float or None
        Largest RF amplitude across a conducting p-n junction in units of N Vt, while RF goes from 10 to 90 % or
        back; None without such a transition.
    """

    level: float
    junctions: tuple[JunctionRf, ...]
    modulation: float | None


@dataclass(frozen=True)
class LargeSignal:
    """What carrier-resolved runs show beside the envelope.

    Parameters
    ----------
    level : float
        Available power of the source [dBm].
    bias_shift_on, bias_shift_off : float
        Change of the mean voltage at the bias entry by the RF, at the end of the interval in which the RF passes and
        of the other [V].
    junction_power : mapping of str to Waveform
        Power into each junction, mean over one carrier period [W].
    """

    level: float
    bias_shift_on: float
    bias_shift_off: float
    junction_power: Mapping[str, Waveform]
