"""RF in the junctions at the stated level, from the small-signal solution, and whether that may be believed."""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np

from transim.circuit.netlist import ThrowPlace
from transim.envelope.internal import RfSolution, solve_internal
from transim.envelope.junction import Array
from transim.envelope.network import Network
from transim.envelope.reduction import Reduction
from transim.envelope.stationary import Complex
from transim.measure.rf import JunctionRf, RfStress
from transim.quantities import format_quantity
from transim.study.case import Case

__all__ = ["StressSolution", "amplitude_of", "small_signal_warnings"]

#: A junction with less current than this is off [A].
_OFF = 1e-6
#: A p-n junction with a smaller share of the path's largest junction current takes no part in the transition.
_CONDUCTING = 1e-3
#: Instants of each transition that are looked at.
_INSTANTS = 24
#: Stored charge over the RF's below which a junction that is on does not stay on.
_CHARGE = 2.0


def amplitude_of(level: float, impedance: float) -> float:
    """Return the peak voltage of a source behind its impedance [V].

    Parameters
    ----------
    level : float
        Available power [dBm].
    impedance : float
        [ohm].

    Notes
    -----
    The available power of an amplitude E behind Z0 is E^2 / 8 Z0.
    """
    return float(np.sqrt(8e-3 * 10.0 ** (level / 10.0) * impedance))


class StressSolution:
    """RF inside the junctions of one case at one carrier, for a source of 1 V.

    Parameters
    ----------
    case : Case
        The circuit.
    throw : ThrowPlace
        The way of the RF; its source stands at the port that the RF enters.
    network : Network
        Linearised along the video run.
    vectors : mapping
        The video run.
    states : tuple of ndarray of complex, shape (n,), and int
        S of the through pair, each instant frozen; the point of the video run at the end of the pulse.
    carrier : float
        [Hz].
    reduction : Reduction
        Of the network.
    """

    def __init__(
        self,
        case: Case,
        throw: ThrowPlace,
        network: Network,
        vectors: Mapping[str, Array],
        states: tuple[Complex, int],
        carrier: float,
        reduction: Reduction,
    ) -> None:
        through, end = states
        self._case = case
        self._throw = throw
        self._vectors = vectors
        port = case.netlist.ports[throw.through[0]]
        self._settled = np.array([0, end], dtype=np.intp)
        self._solution: RfSolution = solve_internal(network.at(self._settled), port, carrier, reduction)
        instants = _transition_points(np.abs(through))
        self._modulation = 0.0 if instants.size else None
        if instants.size:
            currents = [np.abs(vectors[f"i({name})"][instants]) for name in self._ammeters()]
            # zero stands for a path without junctions
            currents.append(np.zeros(instants.size))
            least = _CONDUCTING * np.max(currents, axis=0)
            found = solve_internal(network.at(instants), port, carrier, reduction).modulation(least)
            self._modulation = max((float(values.max()) for values in found.values()), default=0.0)

    def _ammeters(self) -> list[str]:
        return [name for place in self._case.netlist.junctions for name in place.ammeters.values()]

    def at(self, level: float) -> RfStress:
        """Return the stress at a level [dBm]."""
        case = self._case
        amplitude = amplitude_of(level, case.design.carrier.impedance)
        passes = self._throw.passes_high
        junctions = [
            junction
            for k, high in enumerate((False, True))
            for junction in self._junctions(k, "on" if high == passes else "off", amplitude)
        ]
        modulation = None if self._modulation is None else self._modulation * amplitude
        return RfStress(level, tuple(junctions), modulation)

    def _junctions(self, k: int, state: str, amplitude: float) -> list[JunctionRf]:
        point = int(self._settled[k])
        netlist = self._case.netlist
        values = {j.name: j.values for j in self._case.design.switch.junctions.values()}
        found = []
        for place in netlist.junctions:
            bias = max(abs(float(self._vectors[f"i({name})"][point])) for name in place.ammeters.values())
            current = max(abs(complex(self._solution.current(name)[k])) for name in place.ammeters.values())
            charges = [p for p in netlist.probes if p.junction == place.instance and p.quantity == "charge"]
            charge = sum(self._sum(p.terms, point) for p in charges) if charges else None
            reverses = [p for p in netlist.probes if p.junction == place.instance and p.quantity == "reverse"]
            for number, probe in enumerate(reverses, start=1):
                rf = sum(
                    (scale * complex(self._solution.voltage(name[2:-1])[k]) for scale, name in probe.terms), 0j
                )
                found.append(
                    JunctionRf(
                        junction=place.instance if len(reverses) == 1 else f"{place.instance} {number}",
                        state=state,
                        off=bias < _OFF,
                        voltage=abs(rf) * amplitude,
                        current=current * amplitude,
                        reverse=self._sum(probe.terms, point),
                        charge=charge,
                        width=values[place.junction].get("width"),
                    )
                )
        return found

    def _sum(self, terms: tuple[tuple[float, str], ...], point: int) -> float:
        total = 0.0
        for scale, name in terms:
            vector = next(v for key in (name, f"i({name})", f"v({name})") if (v := self._vectors.get(key)) is not None)
            total += scale * float(vector[point])
        return total


def _transition_points(level: Array) -> np.ndarray[tuple[int], np.dtype[np.intp]]:
    """Return points at which RF is between 10 and 90 % of its largest level, thinned."""
    share = level / level.max()
    inside = np.flatnonzero((share >= 0.1) & (share <= 0.9))
    if inside.size == 0 or share.min() > 0.1:
        return np.array([], dtype=np.intp)
    runs = np.split(inside, np.flatnonzero(np.diff(inside) > 1) + 1)
    picked = [run[np.unique(np.linspace(0, run.size - 1, _INSTANTS).astype(int))] for run in runs]
    return np.concatenate(picked)


def small_signal_warnings(stress: RfStress, carrier: float) -> tuple[str, ...]:
    """Say where the small-signal assumption does not hold for junctions that are on, and by how much.

    Parameters
    ----------
    stress : RfStress
        At one level.
    carrier : float
        [Hz].
    """
    level = format_quantity(stress.level, "dBm")
    found = []
    # a junction that blocks holds no stored charge, but the negative one of its depletion
    on = [j for j in stress.junctions if not j.off and (j.charge or 0.0) > 0.0 and j.current > 0.0]
    for junction in on:
        margin = 2.0 * math.pi * carrier * (junction.charge or 0.0) / junction.current
        if margin < _CHARGE:
            found.append(
                f"at {level} the RF moves {junction.junction} by 1/{margin:.2g} of its stored charge while RF is "
                f"{junction.state} (small signal down to 1/{_CHARGE:g}): loss will differ; use --analysis carrier"
            )
    return tuple(found)
