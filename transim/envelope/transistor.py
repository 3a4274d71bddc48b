"""Small-signal form of the SPICE bipolar transistor (Q, Gummel-Poon) along a bias waveform."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from transim.circuit.elements import Device
from transim.envelope.junction import GMIN, Array, Depletion, exponential, saturation_factor, thermal_voltage
from transim.errors import LinearisationError

__all__ = ["TransistorLaw", "TransistorSmallSignal"]

_ALIASES = {
    "va": "vaf", "ik": "ikf", "pe": "vje", "me": "mje", "pc": "vjc", "mc": "mjc", "ps": "vjs", "ms": "mjs",
    "vb": "var", "jbf": "ikf", "jbr": "ikr", "ccs": "cjs", "pt": "xti", "tb": "xtb", "nk": "nkf", "vrf": "var",
}  # fmt: skip
#: Parameters of ngspice's transistor that change its small-signal form and that this module does not have.
_UNKNOWN = {"rco", "vo", "gamma", "qco", "ptf", "iss", "ns", "nepi", "tlev", "tlevc", "quasimod", "subs"}
_DEFAULTS = {
    "is": 1e-16, "bf": 100.0, "nf": 1.0, "vaf": 0.0, "ikf": 0.0, "ise": 0.0, "ne": 1.5, "br": 1.0, "nr": 1.0,
    "var": 0.0, "ikr": 0.0, "isc": 0.0, "nc": 2.0, "rb": 0.0, "irb": 0.0, "rbm": -1.0, "re": 0.0, "rc": 0.0,
    "cje": 0.0, "vje": 0.75, "mje": 0.33, "tf": 0.0, "xtf": 0.0, "vtf": 0.0, "itf": 0.0, "cjc": 0.0, "vjc": 0.75,
    "mjc": 0.33, "xcjc": 1.0, "tr": 0.0, "cjs": 0.0, "vjs": 0.75, "mjs": 0.0, "xtb": 0.0, "eg": 1.11, "xti": 3.0,
    "fc": 0.5, "tnom": 27.0, "nkf": 0.5,
}  # fmt: skip


@dataclass(frozen=True)
class TransistorSmallSignal:
    """Elements of the hybrid-pi form, each of shape (n,).

    Attributes
    ----------
    pi, mu, m, o : ndarray
        gpi, gmu, gm, go [S].
    base : ndarray
        Conductance of the base resistance [S]; infinite where there is none.
    c_be, c_bc, c_bx, c_cross : ndarray
        Capacitances [F] of internal base to emitter, internal base to collector, external base to collector, and
        the dependence of the emitter charge on the collector junction's voltage.
    """

    pi: Array
    mu: Array
    m: Array
    o: Array
    base: Array
    c_be: Array
    c_bc: Array
    c_bx: Array
    c_cross: Array


class TransistorLaw:
    """Hybrid-pi elements of one transistor at one temperature.

    Parameters
    ----------
    device : Device
        Flattened Q element.
    temperature : float
        Circuit temperature [degC].

    Raises
    ------
    LinearisationError
        If the model uses parameters that are not linearised here.

    Notes
    -----
    H. K. Gummel, H. C. Poon, Bell Syst. Tech. J. 49(5), 827-852, 1970; P. Antognetti, G. Massobrio,
    Semiconductor Device Modeling with SPICE, 1988, chapter 2. Voltages are those of an NPN; for a PNP
    they are the negative ones.
    """

    def __init__(self, device: Device, temperature: float) -> None:
        given = {_ALIASES.get(key, key): value for key, value in device.model.parameters.items()}
        used = sorted(key for key in given if key in _UNKNOWN and given[key] != 0.0)
        used += sorted(set(device.parameters) - {"area", "m"})
        if given.get("level", 1.0) != 1.0:
            used.append("level")
        if len(device.nodes) > 3 and given.get("cjs", 0.0) != 0.0:
            used.append("cjs with a substrate node")
        if used:
            raise LinearisationError(
                device.name.upper(),
                f"transistor parameter {used[0]} is not linearised; use the carrier analysis",
            )
        card = {**_DEFAULTS, **{key: value for key, value in given.items() if key in _DEFAULTS}}
        self._card = card
        area, many = device.parameters.get("area", 1.0), device.parameters.get("m", 1.0)
        self._size = area * many
        kelvin, nominal = temperature + 273.15, card["tnom"] + 273.15
        self._vt = thermal_voltage(kelvin)
        factor = saturation_factor(kelvin, nominal, card["eg"], card["xti"])
        gain = math.exp(card["xtb"] * math.log(kelvin / nominal))
        self._is = card["is"] * math.exp(factor) * self._size
        # ngspice 39 scales IS of the collector junction by the area twice
        self._reverse_is = self._is * area
        self._gmin = GMIN * many
        self._bf, self._br = card["bf"] * gain, card["br"] * gain
        self._ise = card["ise"] * math.exp(factor / card["ne"]) / gain * self._size
        self._isc = card["isc"] * math.exp(factor / card["nc"]) / gain * self._size
        both = {"kelvin": kelvin, "nominal": nominal}
        self._be = Depletion(card["cje"] * self._size, card["vje"], card["mje"], card["fc"], **both)
        self._bc = Depletion(card["cjc"] * self._size, card["vjc"], card["mjc"], card["fc"], **both)
        self._cs = Depletion(card["cjs"] * self._size, card["vjs"], card["mjs"], 0.0, **both)
        #: NF Vt and NR Vt [V].
        self.scales = (card["nf"] * self._vt, card["nr"] * self._vt)
        #: Series resistances [ohm]; the base's part that does not depend on bias is inside `small_signal`.
        self.collector_resistance = card["rc"] / self._size
        self.emitter_resistance = card["re"] / self._size
        self.has_base_resistance = card["rb"] > 0.0

    def substrate(self, v: Array) -> Array:
        """Return the collector to substrate capacitance [F] at substrate less collector voltage `v` [V]."""
        return self._cs.capacitance(v)

    def _base_charge(
        self, vbe: Array, vbc: Array, forward: tuple[Array, Array], reverse: tuple[Array, Array]
    ) -> tuple[Array, Array, Array]:
        """Return qb and its slopes with vbe and vbc."""
        card = self._card
        inverse_forward = 1.0 / card["vaf"] if card["vaf"] else 0.0
        inverse_reverse = 1.0 / card["var"] if card["var"] else 0.0
        q1 = 1.0 / (1.0 - inverse_forward * vbc - inverse_reverse * vbe)
        knee_forward = 1.0 / (card["ikf"] * self._size) if card["ikf"] else 0.0
        knee_reverse = 1.0 / (card["ikr"] * self._size) if card["ikr"] else 0.0
        argument = np.maximum(0.0, 1.0 + 4.0 * (knee_forward * forward[0] + knee_reverse * reverse[0]))
        safe = np.maximum(argument, 1e-300)
        root = safe ** card["nkf"]
        qb = q1 * (1.0 + root) / 2.0
        slope = np.where(argument > 0.0, 2.0 * card["nkf"] * safe ** (card["nkf"] - 1.0), 0.0)
        by_be = q1 * (qb * inverse_reverse + slope * knee_forward * forward[1])
        by_bc = q1 * (qb * inverse_forward + slope * knee_reverse * reverse[1])
        return qb, by_be, by_bc

    def _base_conductance(self, qb: Array, base_current: Array) -> Array:
        card = self._card
        smallest = card["rbm"] if card["rbm"] >= 0.0 else card["rb"]
        smallest, spread = smallest / self._size, (card["rb"] - smallest) / self._size
        if not self.has_base_resistance:
            return np.full_like(qb, np.inf)
        if card["irb"] > 0.0:
            ratio = np.maximum(base_current / (card["irb"] * self._size), 1e-9)
            z = (np.sqrt(1.0 + 14.59025 * ratio) - 1.0) / 2.4317 / np.sqrt(ratio)
            tangent = np.tan(z)
            return np.asarray(1.0 / (smallest + 3.0 * spread * (tangent - z) / z / tangent**2))
        return np.asarray(1.0 / (smallest + spread / qb))

    def small_signal(self, vbe: Array, vbc: Array, vbx: Array) -> TransistorSmallSignal:
        """Return the hybrid-pi elements along a bias.

        Parameters
        ----------
        vbe, vbc : ndarray, shape (n,)
            Internal junction voltages, forward positive [V].
        vbx : ndarray, shape (n,)
            External base less internal collector, forward positive [V].
        """
        card, vt = self._card, self._vt
        forward = exponential(vbe, card["nf"] * vt, self._is)
        reverse = exponential(vbc, card["nr"] * vt, self._reverse_is)
        leak_e = exponential(vbe, card["ne"] * vt, self._ise)
        leak_c = exponential(vbc, card["nc"] * vt, self._isc)
        qb, by_be, by_bc = self._base_charge(vbe, vbc, forward, reverse)
        transfer = (forward[0] - reverse[0]) / qb
        go = (reverse[1] + transfer * by_bc) / qb
        gm = (forward[1] - transfer * by_be) / qb - go
        pi = forward[1] / self._bf + leak_e[1] + self._gmin
        mu = reverse[1] / self._br + leak_c[1] + self._gmin
        base_current = forward[0] / self._bf + leak_e[0] + reverse[0] / self._br + leak_c[0]
        diffusion, cross = self._emitter_charge(vbe, vbc, forward, (qb, by_be, by_bc))
        inner = card["xcjc"]
        c_bc = card["tr"] * reverse[1] + inner * self._bc.capacitance(vbc)
        return TransistorSmallSignal(
            pi=pi,
            mu=mu,
            m=gm,
            o=go,
            base=self._base_conductance(qb, base_current),
            c_be=diffusion + self._be.capacitance(vbe),
            c_bc=c_bc,
            c_bx=(1.0 - inner) * self._bc.capacitance(vbx),
            c_cross=cross,
        )

    def _emitter_charge(
        self, vbe: Array, vbc: Array, forward: tuple[Array, Array], base: tuple[Array, Array, Array]
    ) -> tuple[Array, Array]:
        """Return d(TFF If/qb)/dvbe and /dvbc, TFF = TF (1 + XTF (If/(If+ITF))^2 exp(vbc/1.44 VTF))."""
        card = self._card
        current, slope = forward
        qb, by_be, by_bc = base
        excess = np.zeros_like(vbe)
        growth = np.zeros_like(vbe)
        by_collector = np.zeros_like(vbe)
        if card["xtf"] > 0.0:
            excess = np.full_like(vbe, card["xtf"])
            inverse = 1.0 / (1.44 * card["vtf"]) if card["vtf"] else 0.0
            excess = excess * np.exp(np.minimum(vbc * inverse, 600.0))
            growth = excess
            if card["itf"] > 0.0:
                ratio = np.maximum(current, 0.0) / (np.maximum(current, 0.0) + card["itf"] * self._size)
                excess = excess * ratio * ratio
                growth = excess * (3.0 - 2.0 * ratio)
            by_collector = current * excess * inverse
        total = current * (1.0 + excess) / qb
        on = vbe > 0.0
        diffusion = np.where(on, (slope * (1.0 + growth) - total * by_be) / qb, slope)
        cross = np.where(on, (by_collector - total * by_bc) / qb, 0.0)
        return card["tf"] * diffusion, card["tf"] * cross
