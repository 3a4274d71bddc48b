"""Small-signal form of the SPICE diode (D) along a bias waveform."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from transim.circuit.elements import Device
from transim.envelope.junction import GMIN, SMALLEST, Array, Depletion, exponential, saturation_factor, thermal_voltage
from transim.errors import LinearisationError

__all__ = ["DiodeLaw"]

_ALIASES = {"cj0": "cjo", "cj": "cjo", "pb": "vj", "mj": "m", "ik": "ikf", "trs1": "trs", "tc": "trs"}
#: Parameters of ngspice's diode that change its small-signal form and that this module does not have.
_UNKNOWN = {
    "isr", "ikr", "jsw", "is2", "ns", "cjp", "cjsw", "jtun", "jtunsw", "ntun", "xtitun", "tm1", "tm2", "ttt1", "ttt2",
    "tlev", "tlevc", "tcv", "cta", "ctp", "tpb", "tphp", "rth0", "vp", "lm", "lp", "wm", "wp", "xom", "xoi", "xm", "xp",
}  # fmt: skip
_DEFAULTS = {
    "is": 1e-14, "n": 1.0, "rs": 0.0, "tt": 0.0, "cjo": 0.0, "vj": 1.0, "m": 0.5, "fc": 0.5,
    "eg": 1.11, "xti": 3.0, "tnom": 27.0, "trs": 0.0, "ikf": 0.0, "bv": 0.0, "ibv": 1e-3, "nbv": 0.0,
}  # fmt: skip


@dataclass(frozen=True)
class _Scaled:
    saturation: float
    scale: float
    knee: float
    breakdown: float


class DiodeLaw:
    """Conductance and capacitance of one diode at one temperature.

    Parameters
    ----------
    device : Device
        Flattened D element.
    temperature : float
        Circuit temperature [degC].

    Raises
    ------
    LinearisationError
        If the model uses parameters that are not linearised here.

    Notes
    -----
    g = dI/dv of I = IS (exp(v/N Vt) - 1), reduced by high injection above IKF, plus the exponential of breakdown;
    c = TT g + depletion. P. Antognetti, G. Massobrio, Semiconductor Device Modeling with SPICE, 1988, chapter 1.
    """

    def __init__(self, device: Device, temperature: float) -> None:
        given = {_ALIASES.get(key, key): value for key, value in device.model.parameters.items()}
        used = sorted(key for key in given if key in _UNKNOWN and given[key] != 0.0) + sorted(
            set(device.parameters) - {"area", "m"}
        )
        if given.get("level", 1.0) != 1.0:
            used.append("level")
        if "area" in device.parameters and device.parameters.get("m", 1.0) != 1.0:
            # ngspice 39 multiplies the area by m anew before each analysis of a deck
            used.append("m beside area")
        if used:
            raise LinearisationError(
                device.name.upper(), f"diode parameter {used[0]} is not linearised; use the carrier analysis"
            )
        card = {**_DEFAULTS, **{key: value for key, value in given.items() if key in _DEFAULTS}}
        size = device.parameters.get("area", 1.0) * device.parameters.get("m", 1.0)
        kelvin, nominal = temperature + 273.15, card["tnom"] + 273.15
        vt = thermal_voltage(kelvin)
        factor = saturation_factor(kelvin, nominal, card["eg"], card["xti"]) / card["n"]
        saturation = max(card["is"], SMALLEST) * size * math.exp(factor)
        self._reverse = (card["nbv"] or card["n"]) * vt
        # ngspice gives a device of any area the same IBV
        at_breakdown = card["ibv"] * device.parameters.get("m", 1.0)
        knee = _breakdown(card["bv"], at_breakdown, saturation, self._reverse, vt)
        self._scaled = _Scaled(saturation, card["n"] * vt, card["ikf"] * size, knee)
        self._transit = card["tt"]
        self._depletion = Depletion(
            card["cjo"] * size, card["vj"], card["m"], card["fc"], kelvin=kelvin, nominal=nominal
        )
        #: N Vt [V].
        self.scale = card["n"] * vt
        #: Series resistance [ohm].
        self.resistance = card["rs"] * (1.0 + card["trs"] * (kelvin - nominal)) / size

    def small_signal(self, v: Array) -> tuple[Array, Array]:
        """Return conductance [S] and capacitance [F] at junction voltage `v` [V], each of shape (n,)."""
        scaled = self._scaled
        current, slope = exponential(v, scaled.scale, scaled.saturation)
        if scaled.knee > 0.0:
            root = np.sqrt(np.maximum(current, 0.0) / scaled.knee)
            slope = slope * (1.0 + 0.5 * root) / (1.0 + root) ** 2
        if scaled.breakdown > 0.0:
            beyond = v < -scaled.breakdown
            excess = np.where(beyond, -(scaled.breakdown + v) / self._reverse, 0.0)
            slope = np.where(beyond, scaled.saturation * np.exp(np.minimum(excess, 600.0)) / self._reverse, slope)
        slope = slope + GMIN
        return slope, self._transit * slope + self._depletion.capacitance(v)


def _breakdown(voltage: float, current: float, saturation: float, scale: float, vt: float) -> float:
    """Return the voltage at which breakdown, an exponential of slope `scale`, has to start to carry IBV at BV [V]."""
    if voltage <= 0.0:
        return 0.0
    if current < saturation * voltage / vt:
        return voltage
    knee = voltage - scale * math.log(1.0 + current / saturation)
    for _ in range(25):
        knee = voltage - scale * math.log(current / saturation + 1.0 - knee / vt)
    return knee
