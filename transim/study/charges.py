"""What the driver's current meets before the junctions, found in the flattened circuit, and the charge on it.

The nodes that direct current reaches from the bias entry without a junction are taken together. What crosses from
them to anywhere else takes the driver's charge: junctions, which their own probes account for, capacitances, whose
charge follows from their voltage, and resistances past the junctions.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from transim.circuit.elements import Circuit
from transim.circuit.netlist import Feed, JunctionPlace
from transim.envelope.bias import Bias
from transim.envelope.junction import Array
from transim.errors import RawFileError
from transim.measure.waveform import Waveform
from transim.study.case import Case
from transim.study.terminals import anode_of, junction_at

__all__ = ["fed_junctions", "other_charges", "reached_nodes"]

def reached_nodes(circuit: Circuit, feed: Feed) -> frozenset[str]:
    """Return the nodes that direct current reaches from a bias entry without a junction.

    Parameters
    ----------
    circuit : Circuit
        Flattened.
    feed : Feed
        The bias entry.

    Returns
    -------
    frozenset of str
        Connected through resistors, inductors, voltage sources and lines; ground and the driver left out.
    """
    links: dict[str, set[str]] = {}
    pairs = [part.nodes[:2] for part in circuit.elements if part.name[0] in "rlv" and part.name != feed.ammeter]
    pairs += [ends for line in circuit.delays for ends in (line.nodes[::2], line.nodes[1::2])]
    for first, second in pairs:
        links.setdefault(first, set()).add(second)
        links.setdefault(second, set()).add(first)
    found, waiting = {feed.entry}, [feed.entry]
    while waiting:
        new = links.get(waiting.pop(), set()) - found - {"0"}
        found |= new
        waiting += new
    return frozenset(found)


def fed_junctions(case: Case, reached: frozenset[str]) -> dict[str, float]:
    """Return the junctions that the driver's current meets first.

    Parameters
    ----------
    case : Case
        The circuit.
    reached : frozenset of str
        Nodes of the bias entry.

    Returns
    -------
    dict of str to float
        By instance: +1 where forward current comes out of the driver, -1 where it goes into it. A junction with
        both ends among the nodes is left out.
    """
    found = {}
    for place in case.netlist.junctions:
        inside = {name for name, node in place.nodes.items() if node in reached}
        if inside and len(inside) < len(place.nodes):
            found[place.instance] = _side(case, place, inside)
    return found


def _side(case: Case, place: JunctionPlace, inside: set[str]) -> float:
    return 1.0 if anode_of(junction_at(case.design, place)) in inside else -1.0


def other_charges(
    circuit: Circuit, feed: Feed, reached: frozenset[str], vectors: Mapping[str, Array]
) -> dict[str, Waveform]:
    """Return the charge that the driver's current leaves anywhere but in the junctions' conduction.

    Parameters
    ----------
    circuit : Circuit
        Flattened.
    feed : Feed
        The bias entry.
    reached : frozenset of str
        Its nodes.
    vectors : mapping
        The video run, by name as ngspice prints it.

    Returns
    -------
    dict of str to Waveform
        By element: charge on a capacitance, or what has flown through a resistance or source since the begin [C].
    """
    time = vectors["time"]
    bias = Bias(vectors, time)
    found: dict[str, Waveform] = {}
    for part in circuit.elements:
        if part.name == feed.ammeter or part.name[0] not in "crlv":
            continue
        first, second = part.nodes[:2]
        if (first in reached) == (second in reached):
            continue
        sign = 1.0 if first in reached else -1.0
        try:
            found[part.name] = Waveform(time, sign * _charge(part.name, part.value, (first, second), bias), "C")
        except RawFileError:
            # what a run did not save shows in the closing error
            continue
    for line in circuit.delays:
        if line.nodes[0] in reached:
            currents = [vectors.get(f"i({line.name}#{end})", vectors.get(f"{line.name}#{end}")) for end in ("i1", "i2")]
            if currents[0] is not None and currents[1] is not None:
                found[line.name] = Waveform(time, _integral(time, currents[0] + currents[1]), "C")
    return found


def _charge(name: str, value: float, nodes: tuple[str, str], bias: Bias) -> Array:
    """Return the charge that went from the first node into an element [C]."""
    if name[0] in "lv":
        return _integral(bias.time, bias.current(name))
    across = bias.voltage(nodes[0]) - bias.voltage(nodes[1])
    return value * across if name[0] == "c" else _integral(bias.time, across / value)


def _integral(time: Array, current: Array) -> Array:
    steps = np.diff(time) * (current[1:] + current[:-1]) / 2.0
    return np.concatenate(([0.0], np.cumsum(steps)))
