"""The linear network of a case, with its elements that have no small-signal form decided on, one by one."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from transim.circuit.elements import Circuit, Opaque
from transim.envelope.admittance import Admittance, admittance_deck, biased_instants, read_admittances
from transim.envelope.bias import Bias
from transim.envelope.doubt import Doubt, doubt_points
from transim.envelope.frozen import changing_points
from transim.envelope.junction import Array
from transim.envelope.linearise import linearise, opaque_elements, supply_nodes
from transim.envelope.network import Network
from transim.errors import LinearisationError
from transim.quantities import format_quantity
from transim.study.case import Case

__all__ = ["Linearised", "linearised_case"]

#: What an element may move S by without being known [dB]: what the comparison with ngspice tolerates.
_TOLERATED = 0.05
#: Share by which an admittance at rest may differ from that of the instant.
_SHARE = 0.1
#: Change of an entry between instants at which elements are tried.
_COARSE = 0.2

#: Elements that act between their own terminals alone.
_KINDS = {
    "m": "MOSFET", "j": "JFET", "z": "MESFET", "s": "switch", "w": "switch", "d": "diode", "q": "transistor",
    "r": "resistor", "c": "capacitor", "l": "inductor", "o": "line",
}  # fmt: skip


@dataclass(frozen=True)
class Linearised:
    """A network, and what is to be said about it.

    Attributes
    ----------
    network : Network
        Along the video run.
    notes : tuple of str
        One for each element without a small-signal form.
    """

    network: Network
    notes: tuple[str, ...]


def linearised_case(case: Case, circuit: Circuit, vectors: Mapping[str, Array]) -> Linearised:
    """Linearise the circuit of a case along its video run.

    An element without a small-signal form is left out where S hardly moves whatever it does. Where it does more, its
    admittance is taken from ngspice at the voltages of the run, if a share of it hardly moves the transmissions: at
    rest it is not quite that of the moving circuit.

    Parameters
    ----------
    case : Case
        The circuit.
    circuit : Circuit
        The same, flattened.
    vectors : mapping
        The video run, by name as ngspice prints it.

    Returns
    -------
    Linearised

    Raises
    ------
    LinearisationError
        Naming an element that matters and by how much.
    """
    bias = Bias(vectors, vectors["time"])
    sources = [port.source for port in case.netlist.ports]
    elements = opaque_elements(circuit, case.temperature)
    if not elements:
        return Linearised(linearise(circuit, bias, case.temperature, sources), ())
    for element in elements:
        if element.name[0] not in _KINDS:
            # it may carry RF from anywhere, so that nothing can be said of what it does
            raise element.reason
    quiet = supply_nodes(circuit, sources)
    stands: dict[str, Admittance | None] = {element.name: None for element in elements}
    network = linearise(circuit, bias, case.temperature, sources, stands)
    instants = biased_instants(elements, bias)
    points = doubt_points(np.union1d(instants, changing_points(network, _COARSE)))
    doubt = Doubt(network.at(points), case.netlist.ports, case.design.carrier.frequency, elements, quiet)
    whatever = {element.name: doubt.whatever(element.name, _TOLERATED) for element in elements}
    notes = [
        f"{name.upper()}: {_kind(element)} left out; whatever it does moves S by at most "
        f"{format_quantity(whatever[name], 'dB', 2)}"
        for element in elements
        if whatever[(name := element.name)] <= _TOLERATED
    ]
    serious = [element for element in elements if not whatever[element.name] <= _TOLERATED]
    if not serious:
        return Linearised(network, tuple(notes))
    for element in serious:
        if element.rest is None:
            largest = format_quantity(doubt.between(element.name), "dB", 3)
            raise _refusal(element, f"between open and all terminals tied together it moves S by up to {largest}")
    found = _admittances(case, circuit, bias, serious, quiet)
    middle = len(found) // 2
    stands |= found[middle]
    network = linearise(circuit, bias, case.temperature, sources, stands)
    points = doubt_points(np.union1d(instants, changing_points(network, _COARSE)))
    wide = doubt
    doubt = Doubt(network.at(points), case.netlist.ports, case.design.carrier.frequency, serious, quiet)
    pairs = [throw.through for throw in case.netlist.throws]
    at_points = [{name: one.at(points) for name, one in carrier.items()} for carrier in found]
    for name, share in doubt.by_share(at_points, middle, _SHARE, pairs).items():
        element = next(one for one in serious if one.name == name)
        moved = format_quantity(share, "dB", 2)
        if not share <= _TOLERATED:
            raise _refusal(
                element,
                f"{_SHARE:.0%} of its admittance at rest move the transmission by up to {moved}, and "
                f"between open and all terminals tied together it moves S by up to "
                f"{format_quantity(wide.between(name), 'dB', 3)}",
            )
        notes.append(
            f"{name.upper()}: {_kind(element)} taken with the admittance that ngspice finds at the voltages of each "
            f"instant; {_SHARE:.0%} of it move the transmission by at most {moved}"
        )
    return Linearised(network, tuple(notes))


def _admittances(
    case: Case, circuit: Circuit, bias: Bias, elements: Sequence[Opaque], quiet: frozenset[str]
) -> list[dict[str, Admittance]]:
    """Return the admittances along the run, one mapping a carrier."""
    instants = biased_instants(elements, bias)
    few = bias.at(instants)
    found = []
    for number, frequency in enumerate(case.design.carrier.frequency, start=1):
        deck = admittance_deck(f"admittance_{number}", elements, quiet, circuit, few, frequency, case.origin)
        plot = case.run(deck).plots[0]
        read = read_admittances(plot, elements, quiet, instants.size, frequency)
        found.append({name: one.along(few.time, bias.time) for name, one in read.items()})
    return found


def _kind(element: Opaque) -> str:
    """Return what an element is in words."""
    return _KINDS[element.name[0]]


def _refusal(element: Opaque, why: str) -> LinearisationError:
    return LinearisationError(
        element.name.upper(), f"{element.reason.reason.partition(';')[0]}: {why}; use the carrier analysis"
    )
