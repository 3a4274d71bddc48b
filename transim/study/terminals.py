"""What flows at the terminals of junctions, driver and supplies in a run."""

from __future__ import annotations

import re
from collections.abc import Mapping

import numpy as np

from transim.circuit.netlist import JunctionPlace
from transim.design.model import Design, Junction
from transim.envelope.junction import Array
from transim.measure.waveform import Waveform
from transim.study.case import Case

__all__ = [
    "anode_of",
    "driver_output_power",
    "junction_at",
    "junction_currents",
    "junction_powers",
    "polarity",
    "supply_currents",
]

_PNP = re.compile(r"(?i)\s*\.model\s+\S+\s+pnp\b")
_NODE = re.compile(r"v\((?P<terminal>\w+)\)")


def junction_at(design: Design, place: JunctionPlace) -> Junction:
    """Return the junction that sits at a place of the path.

    Parameters
    ----------
    design : Design
        The design.
    place : JunctionPlace
        One of its netlist's.

    Returns
    -------
    Junction
    """
    return next(j for j in design.switch.junctions.values() if j.name == place.junction)


def polarity(junction: Junction) -> float:
    """Return the sign that turns a junction's own voltages and currents into those of its part file.

    Parameters
    ----------
    junction : Junction
        Of the design.

    Returns
    -------
    float
        -1 where a card of a PNP transistor stands for an NPN one, else 1.
    """
    return -1.0 if junction.model is not None and _PNP.match(junction.model) else 1.0


def junction_currents(case: Case, vectors: Mapping[str, Array]) -> dict[str, Waveform]:
    """Return the forward current of each junction.

    Parameters
    ----------
    case : Case
        The circuit.
    vectors : mapping
        The video run, by name as ngspice prints it.

    Returns
    -------
    dict of str to Waveform
        By instance: current into the anode, displacement current included, positive when forward [A]. The anode
        is the terminal that the part's probe of its reverse voltage subtracts, without such a probe the first.
    """
    found = {}
    for place in case.netlist.junctions:
        junction = junction_at(case.design, place)
        current = polarity(junction) * _terminal_current(place, anode_of(junction), vectors)
        found[place.instance] = Waveform(vectors["time"], current, "A")
    return found


def junction_powers(case: Case, vectors: Mapping[str, Array]) -> dict[str, Waveform]:
    """Return the power into each junction.

    Parameters
    ----------
    case : Case
        The circuit.
    vectors : mapping
        The video run, by name as ngspice prints it.

    Returns
    -------
    dict of str to Waveform
        By instance: sum of voltage times current over all terminals, voltages against the last one [W].
    """
    found = {}
    for place in case.netlist.junctions:
        last = _voltage(list(place.nodes.values())[-1], vectors)
        power = sum(
            ((_voltage(place.nodes[name], vectors) - last) * vectors[f"i({source})"])
            for name, source in place.ammeters.items()
        )
        found[place.instance] = Waveform(vectors["time"], np.asarray(power), "W")
    return found


def driver_output_power(case: Case, vectors: Mapping[str, Array]) -> Waveform:
    """Return the power out of the drivers of all bias entries.

    Parameters
    ----------
    case : Case
        The circuit.
    vectors : mapping
        The video run, by name as ngspice prints it.

    Returns
    -------
    Waveform
        [W].
    """
    powers = [vectors[f"v({feed.node})"] * vectors[f"i({feed.ammeter})"] for feed in case.netlist.feeds]
    return Waveform(vectors["time"], np.sum(powers, axis=0), "W")


def supply_currents(case: Case, vectors: Mapping[str, Array]) -> dict[str, Waveform]:
    """Return the current out of each supply.

    Parameters
    ----------
    case : Case
        The circuit.
    vectors : mapping
        The video run, by name as ngspice prints it.

    Returns
    -------
    dict of str to Waveform
        By terminal of the driver [A].
    """
    return {
        source.removeprefix("vsupply_"): Waveform(vectors["time"], 0.0 - vectors[f"i({source})"], "A")
        for source in case.netlist.supplies
    }


def anode_of(junction: Junction) -> str:
    """Return the terminal that forward current enters.

    Parameters
    ----------
    junction : Junction
        Of the design.

    Returns
    -------
    str
        The one that the part's probe of its reverse voltage subtracts, without such a probe the first.
    """
    terminals = [name.lower() for name in junction.part.terminals]
    for probe in junction.part.probes:
        if probe.quantity != "reverse":
            continue
        for scale, vector in probe.terms:
            match = _NODE.fullmatch(vector.replace(" ", "").lower())
            if scale < 0.0 and match is not None and match["terminal"] in terminals:
                return match["terminal"]
    return terminals[0]


def _terminal_current(place: JunctionPlace, terminal: str, vectors: Mapping[str, Array]) -> Array:
    """Return the current into a terminal; that of the last one follows from the others."""
    # slots and parts have the same terminals in the same order
    if terminal in place.ammeters:
        return vectors[f"i({place.ammeters[terminal]})"]
    return np.asarray(-np.sum([vectors[f"i({source})"] for source in place.ammeters.values()], axis=0))


def _voltage(node: str, vectors: Mapping[str, Array]) -> Array:
    return np.zeros(vectors["time"].size) if node == "0" else vectors[f"v({node})"]
