"""The linear network of a case, with its elements that have no small-signal form decided on, one by one."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

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
    elements = opaque_elements(circuit, case.temperature)
    for element in elements:
        if element.name[0] not in _KINDS:
            # it may carry RF from anywhere, so that nothing can be said of what it does
            raise element.reason
    decision = _Decision(case, circuit, Bias(vectors, vectors["time"]), elements)
    if not elements:
        return Linearised(decision.network, ())
    known: list[Opaque] = []
    while unknown := decision.moving([element for element in elements if element not in known]):
        known += unknown
        decision.ask(known)
    return Linearised(decision.network, (*decision.left_out(), *decision.taken(known)))


class _Decision:
    """What stands for each element without a small-signal form, as it is decided."""

    def __init__(self, case: Case, circuit: Circuit, bias: Bias, elements: Sequence[Opaque]) -> None:
        self._case, self._circuit, self._bias, self._elements = case, circuit, bias, elements
        self._sources = [port.source for port in case.netlist.ports]
        self._quiet = supply_nodes(circuit, self._sources) if elements else frozenset()
        self._instants = biased_instants(elements, bias) if elements else np.zeros(0, dtype=np.intp)
        self._stands: dict[str, Admittance | None] = {element.name: None for element in elements}
        self._found: list[dict[str, Admittance]] = []
        self._whatever: dict[str, float] = {}
        self._widest: dict[str, Doubt] = {}
        self.network = self._linearised()

    def _linearised(self) -> Network:
        case = self._case
        return linearise(self._circuit, self._bias, case.temperature, self._sources, self._stands)

    def _points(self) -> npt.NDArray[np.intp]:
        return doubt_points(np.union1d(self._instants, changing_points(self.network, _COARSE)))

    def _doubt(self, points: npt.NDArray[np.intp], elements: Sequence[Opaque]) -> Doubt:
        case = self._case
        frequency = case.design.carrier.frequency
        return Doubt(self.network.at(points), case.netlist.ports, frequency, elements, self._quiet)

    def moving(self, open_elements: Sequence[Opaque]) -> list[Opaque]:
        """Return those of the elements that nothing stands for which may move S by more than is tolerated."""
        if not open_elements:
            return []
        doubt = self._doubt(self._points(), open_elements)
        self._whatever = {element.name: doubt.whatever(element.name, _TOLERATED) for element in open_elements}
        found = [element for element in open_elements if not self._whatever[element.name] <= _TOLERATED]
        self._widest |= {element.name: doubt for element in found}
        for element in found:
            del self._whatever[element.name]
            if element.rest is None:
                raise self._refusal(element)
        return found

    def ask(self, elements: Sequence[Opaque]) -> None:
        """Put what ngspice finds in the place of elements."""
        few = self._bias.at(self._instants)
        self._found = []
        # of two questions the later one holds all of the earlier
        self._case.decks[:] = [deck for deck in self._case.decks if not deck.name.startswith("admittance_")]
        for number, frequency in enumerate(self._case.design.carrier.frequency, start=1):
            name = f"admittance_{number}"
            deck = admittance_deck(name, elements, self._quiet, self._circuit, few, frequency, self._case.origin)
            plot = self._case.run(deck).plots[0]
            read = read_admittances(plot, elements, self._quiet, few.points, frequency)
            self._found.append({key: one.along(few.time, self._bias.time) for key, one in read.items()})
        self._stands |= self._found[self._middle]
        self.network = self._linearised()

    @property
    def _middle(self) -> int:
        """Place of the carrier whose admittances stand at all carriers."""
        return len(self._found) // 2

    def left_out(self) -> list[str]:
        """Say of the elements that nothing stands for what they may do."""
        return [
            f"{element.name.upper()}: {_KINDS[element.name[0]]} left out; whatever it does moves S by at most "
            f"{format_quantity(self._whatever[element.name], 'dB', 2)}"
            for element in self._elements
            if element.name in self._whatever
        ]

    def taken(self, elements: Sequence[Opaque]) -> list[str]:
        """Say of the other elements how sure they are; refuse one that is not."""
        if not elements:
            return []
        points = self._points()
        found = [{name: one.at(points) for name, one in carrier.items()} for carrier in self._found]
        pairs = [throw.through for throw in self._case.netlist.throws]
        shares = self._doubt(points, elements).by_share(found, self._middle, _SHARE, pairs)
        notes = []
        for element in elements:
            share = shares[element.name]
            moved = f"{_SHARE:.0%} of its admittance at rest move the transmission by"
            if not share <= _TOLERATED:
                raise self._refusal(element, f"{moved} up to {format_quantity(share, 'dB', 2)}, and ")
            notes.append(
                f"{element.name.upper()}: {_KINDS[element.name[0]]} taken with the admittance that ngspice finds at "
                f"the voltages of each instant; {moved} at most {format_quantity(share, 'dB', 2)}"
            )
        return notes

    def _refusal(self, element: Opaque, before: str = "") -> LinearisationError:
        what = element.reason.reason.partition(";")[0]
        largest = format_quantity(self._widest[element.name].between(element.name), "dB", 3)
        return LinearisationError(
            element.name.upper(),
            f"{what}: {before}between open and all terminals tied together it moves S by up to {largest}; use the "
            "carrier analysis",
        )
