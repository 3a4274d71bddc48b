"""The flattened circuit, element by element, as entries of a linear network around its bias."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from types import MappingProxyType

import numpy as np

from transim.circuit.elements import Behavioural, Circuit, Coupling, Device, Element, Line, Opaque, opaque_device
from transim.envelope.admittance import Admittance
from transim.envelope.bias import Bias
from transim.envelope.diode import DiodeLaw
from transim.envelope.junction import GMIN, Array
from transim.envelope.network import Delay, InnerJunction, Network
from transim.envelope.transistor import TransistorLaw
from transim.errors import LinearisationError, RawFileError

__all__ = ["linearise", "opaque_elements", "saved_vectors", "supply_nodes"]

#: What ngspice has to save of each device, beside all node voltages and branch currents.
_DEVICE_VECTORS = {"d": ("vd",), "q": ("vbe", "vbc", "ic")}


def saved_vectors(circuit: Circuit) -> tuple[str, ...]:
    """Return the device vectors that the linearisation needs in the video run, as on a ``.save`` card."""
    return tuple(
        f"@{device.name}[{name}]" for device in circuit.devices for name in _DEVICE_VECTORS[device.name[0]]
    )


#: An entry that changes by a smaller share is a constant: its changes are rounding.
_STILL = 1e-12


class _Stamps:
    """Collects the entries of G and C."""

    def __init__(self, points: int, quiet: frozenset[str]) -> None:
        self.points = points
        self.quiet = quiet
        self.unknowns: dict[str, int] = {}
        self.constant: dict[str, dict[tuple[int, int], float]] = {"g": {}, "c": {}}
        self.varying: dict[str, dict[tuple[int, int], Array]] = {"g": {}, "c": {}}
        self.junctions: list[InnerJunction] = []
        self.delays: list[Delay] = []

    def place(self, key: str) -> int:
        return self.unknowns.setdefault(key, len(self.unknowns))

    def node(self, name: str) -> int:
        return -1 if name == "0" or name in self.quiet else self.place(f"v:{name}")

    def add(self, row: int, column: int, value: float | Array, kind: str = "g") -> None:
        if row < 0 or column < 0:
            return
        if isinstance(value, np.ndarray) and value.size > 1:
            table = self.varying[kind]
            table[row, column] = table.get((row, column), 0.0) + np.asarray(value)
        else:
            fixed = self.constant[kind]
            fixed[row, column] = fixed.get((row, column), 0.0) + np.asarray(value).item()

    def transfer(
        self, out: tuple[str, str], control: tuple[str, str], value: float | Array, kind: str = "g"
    ) -> None:
        """Add a current value * v(control) that flows from out[0] through the element to out[1]."""
        for row, row_sign in ((self.node(out[0]), 1.0), (self.node(out[1]), -1.0)):
            for column, sign in ((self.node(control[0]), 1.0), (self.node(control[1]), -1.0)):
                self.add(row, column, row_sign * sign * value, kind)

    def admittance(self, plus: str, minus: str, value: float | Array, kind: str = "g") -> None:
        self.transfer((plus, minus), (plus, minus), value, kind)

    def branch(self, name: str, plus: str, minus: str) -> int:
        """Add the unknown current of a branch and the voltage across it to the branch's own row."""
        row = self.place(f"i:{name}")
        for node, sign in ((self.node(plus), 1.0), (self.node(minus), -1.0)):
            self.add(node, row, sign)
            self.add(row, node, sign)
        return row

    def network(self, time: Array) -> Network:
        size = len(self.unknowns)
        fixed = {kind: np.zeros((size, size)) for kind in "gc"}
        for kind, entries in self.constant.items():
            for (row, column), value in entries.items():
                fixed[kind][row, column] += value
        changing = {kind: self._changing(kind, fixed[kind]) for kind in "gc"}
        places = sorted({*changing["g"], *changing["c"]})
        varying = {kind: np.zeros((self.points, len(places))) for kind in "gc"}
        for kind, table in changing.items():
            for k, place in enumerate(places):
                if place in table:
                    varying[kind][:, k] = table[place]
        index = np.array(places, dtype=np.intp).reshape(-1, 2)
        return Network(
            dict(self.unknowns),
            fixed["g"],
            fixed["c"],
            index[:, 0],
            index[:, 1],
            varying["g"],
            varying["c"],
            time,
            tuple(self.junctions),
            tuple(self.delays),
        )

    def _changing(self, kind: str, fixed: Array) -> dict[tuple[int, int], Array]:
        """Return the entries that change with time; those that do not are added to the fixed ones."""
        changing = {}
        for place, values in self.varying[kind].items():
            first = values[0]
            if np.abs(values - first).max() <= _STILL * abs(first):
                fixed[place] += first
            else:
                changing[place] = values
        return changing


def opaque_elements(circuit: Circuit, temperature: float) -> tuple[Opaque, ...]:
    """Return what has no small-signal form here: elements of other kinds, and devices with parameters that have none.

    Parameters
    ----------
    circuit : Circuit
        Flattened elements.
    temperature : float
        Circuit temperature [degC].
    """
    found = list(circuit.opaque)
    lines = {line.split()[0].lower(): line for line in circuit.lines if line[:1].isalpha()}
    for device in circuit.devices:
        try:
            (DiodeLaw if device.name[0] == "d" else TransistorLaw)(device, temperature)
        except LinearisationError as reason:
            found.append(opaque_device(device, lines[device.name], reason))
    return tuple(found)


def linearise(
    circuit: Circuit,
    bias: Bias,
    temperature: float,
    ports: Collection[str],
    admittances: Mapping[str, Admittance | None] = MappingProxyType({}),
) -> Network:
    """Linearise a flattened circuit along its bias.

    Parameters
    ----------
    circuit : Circuit
        Flattened elements.
    bias : Bias
        Waveforms of the run around which to linearise, n points.
    temperature : float
        Circuit temperature [degC].
    ports : collection of str
        Names of the sources behind the RF ports.
    admittances : mapping of str to Admittance or None
        What stands for each element without a small-signal form; None: nothing but a tiny leakage.

    Returns
    -------
    Network

    Raises
    ------
    LinearisationError
        Naming the first element that has no small-signal form and that nothing stands for.
    """
    opaque = opaque_elements(circuit, temperature)
    if unknown := [element for element in opaque if element.name not in admittances]:
        raise unknown[0].reason
    supplies = _supplies(circuit, ports)
    stamps = _Stamps(bias.points, frozenset(supplies.values()))
    for node in circuit.nodes:
        stamps.node(node)
    inductance: dict[str, float] = {}
    for element in circuit.elements:
        if element.name not in supplies:
            _stamp_element(stamps, element, inductance)
    for line in circuit.delays:
        _stamp_line(stamps, line)
    for coupling in circuit.couplings:
        _stamp_coupling(stamps, coupling, inductance)
    _stamp_opaque(stamps, opaque, admittances)
    known = [device for device in circuit.devices if device.name not in admittances]
    for device in known:
        (_stamp_diode if device.name[0] == "d" else _stamp_transistor)(stamps, device, bias, temperature)
    for source in circuit.behaviourals:
        _stamp_behavioural(stamps, source, bias, temperature)
    for element in circuit.elements:
        _stamp_current_control(stamps, element)
    return stamps.network(bias.time)


def supply_nodes(circuit: Circuit, ports: Collection[str]) -> frozenset[str]:
    """Return the nodes that a supply holds: they have no RF voltage.

    Parameters
    ----------
    circuit : Circuit
        Flattened elements.
    ports : collection of str
        Names of the sources behind the RF ports.
    """
    return frozenset(_supplies(circuit, ports).values())


def _supplies(circuit: Circuit, ports: Collection[str]) -> dict[str, str]:
    """Return the voltage sources from a node to ground, with the node: it has no RF voltage, so needs no unknown."""
    used = {element.source for element in circuit.elements} | set(ports)
    used |= {name for source in circuit.behaviourals for name in source.law.sources}
    found: dict[str, str] = {}
    for element in circuit.elements:
        # a source inside the path may be the ammeter of a junction with a grounded terminal, whose RF current is wanted
        if element.name[0] == "v" and element.name not in used and not element.name.startswith("v.xpath."):
            node = element.nodes[0] if element.nodes[1] == "0" else element.nodes[1]
            if "0" in element.nodes and node != "0" and node not in found.values():
                found[element.name] = node
    return found


def _stamp_element(stamps: _Stamps, element: Element, inductance: dict[str, float]) -> None:
    plus, minus = element.nodes[0], element.nodes[1]
    letter = element.name[0]
    if letter == "r":
        stamps.admittance(plus, minus, 1.0 / element.value)
    elif letter == "c":
        stamps.admittance(plus, minus, element.value, "c")
    elif letter == "g":
        stamps.transfer((plus, minus), (element.nodes[2], element.nodes[3]), element.value)
    elif letter in "vehl":
        row = stamps.branch(element.name, plus, minus)
        if letter == "l":
            inductance[element.name] = element.value
            stamps.add(row, row, -element.value, "c")
        if letter == "e":
            for node, sign in ((element.nodes[2], -1.0), (element.nodes[3], 1.0)):
                stamps.add(row, stamps.node(node), sign * element.value)


def _stamp_opaque(
    stamps: _Stamps, elements: Collection[Opaque], admittances: Mapping[str, Admittance | None]
) -> None:
    """Add what stands for elements; the leakage keeps a node that nothing else holds from being singular."""
    for element in elements:
        for node in dict.fromkeys(element.nodes):
            stamps.add(stamps.node(node), stamps.node(node), GMIN)
        if (admittance := admittances[element.name]) is not None:
            _stamp_admittance(stamps, admittance)


def _stamp_admittance(stamps: _Stamps, admittance: Admittance) -> None:
    places = [stamps.node(node) for node in admittance.nodes]
    for i, row in enumerate(places):
        for k, column in enumerate(places):
            stamps.add(row, column, admittance.conductance[:, i, k])
            stamps.add(row, column, admittance.capacitance[:, i, k], "c")


def _stamp_current_control(stamps: _Stamps, element: Element) -> None:
    if element.source is None:
        return
    key = f"i:{element.source}"
    if key not in stamps.unknowns:
        raise LinearisationError(
            element.name.upper(), f"its controlling source {element.source} has no current"
        )
    column = stamps.unknowns[key]
    if element.name[0] == "f":
        stamps.add(stamps.node(element.nodes[0]), column, element.value)
        stamps.add(stamps.node(element.nodes[1]), column, -element.value)
    else:
        stamps.add(stamps.unknowns[f"i:{element.name}"], column, -element.value)


def _stamp_line(stamps: _Stamps, line: Line) -> None:
    """Add v - Z0 i at each end, equal to v + Z0 i at the other end one delay ago (method of characteristics)."""
    ends = (line.nodes[:2], line.nodes[2:])
    currents = [stamps.place(f"i:{line.name}#{k}") for k in (1, 2)]
    for row, (near, far) in enumerate(((0, 1), (1, 0))):
        for node, sign in zip(ends[near], (1.0, -1.0), strict=True):
            place = stamps.node(node)
            stamps.add(place, currents[near], sign)
            stamps.add(currents[row], place, sign)
        stamps.add(currents[row], currents[near], -line.impedance)
        for node, sign in zip(ends[far], (1.0, -1.0), strict=True):
            place = stamps.node(node)
            if place >= 0:
                stamps.delays.append(Delay(currents[row], place, -sign, line.delay))
        stamps.delays.append(Delay(currents[row], currents[far], -line.impedance, line.delay))


def _stamp_coupling(stamps: _Stamps, coupling: Coupling, inductance: Mapping[str, float]) -> None:
    try:
        first, second = (inductance[name] for name in coupling.inductors)
    except KeyError as error:
        raise LinearisationError(coupling.name.upper(), f"there is no inductor {error}") from error
    mutual = coupling.factor * float(np.sqrt(first * second))
    rows = [stamps.unknowns[f"i:{name}"] for name in coupling.inductors]
    stamps.add(rows[0], rows[1], -mutual, "c")
    stamps.add(rows[1], rows[0], -mutual, "c")


def _stamp_diode(stamps: _Stamps, device: Device, bias: Bias, temperature: float) -> None:
    law = DiodeLaw(device, temperature)
    anode, cathode = device.nodes[:2]
    conductance, capacitance = law.small_signal(bias.device(device.name, "vd"))
    inner = anode
    if law.resistance > 0.0:
        inner = f"{device.name}#anode"
        stamps.admittance(anode, inner, 1.0 / law.resistance)
    stamps.admittance(inner, cathode, conductance)
    stamps.junctions.append(
        InnerJunction(device.name, stamps.node(inner), stamps.node(cathode), law.scale, conductance * law.scale)
    )
    stamps.admittance(inner, cathode, capacitance, "c")


def _stamp_transistor(stamps: _Stamps, device: Device, bias: Bias, temperature: float) -> None:
    law = TransistorLaw(device, temperature)
    collector, base, emitter = device.nodes[:3]
    vbe, vbc = bias.device(device.name, "vbe"), bias.device(device.name, "vbc")
    inner = {}
    for name, node, resistance in (
        ("collector", collector, law.collector_resistance),
        ("emitter", emitter, law.emitter_resistance),
    ):
        inner[name] = f"{device.name}#{name}" if resistance > 0.0 else node
        if resistance > 0.0:
            stamps.admittance(node, inner[name], 1.0 / resistance)
    polarity = -1.0 if device.model.kind == "pnp" else 1.0
    drop = law.collector_resistance * bias.device(device.name, "ic")
    outer = polarity * (bias.voltage(base) - bias.voltage(collector) + drop)
    signal = law.small_signal(vbe, vbc, outer)
    inner["base"] = f"{device.name}#base" if law.has_base_resistance else base
    if law.has_base_resistance:
        stamps.admittance(base, inner["base"], signal.base)
    b, c, e = inner["base"], inner["collector"], inner["emitter"]
    for minus, scale, slope in ((e, law.scales[0], signal.pi), (c, law.scales[1], signal.mu)):
        stamps.junctions.append(InnerJunction(device.name, stamps.node(b), stamps.node(minus), scale, slope * scale))
    stamps.admittance(b, e, signal.pi)
    stamps.admittance(b, e, signal.c_be, "c")
    stamps.admittance(b, c, signal.mu)
    stamps.admittance(b, c, signal.c_bc, "c")
    stamps.admittance(base, c, signal.c_bx, "c")
    stamps.transfer((c, e), (b, e), signal.m)
    stamps.admittance(c, e, signal.o)
    stamps.transfer((b, e), (b, c), signal.c_cross, "c")


def _stamp_behavioural(stamps: _Stamps, source: Behavioural, bias: Bias, temperature: float) -> None:
    law = source.law
    try:
        dual = law.evaluate(bias.probes(law.nodes, law.sources), {"temper": temperature})
    except RawFileError as error:
        raise LinearisationError(
            source.name.upper(), f"its control is not known ({error.message})"
        ) from error
    plus, minus = source.nodes
    row = stamps.branch(source.name, plus, minus) if source.quantity == "v" else -1
    for key, slope in dual.partial.items():
        slope = np.where(np.isfinite(slope), slope, 0.0) + np.zeros(bias.points)
        kind, name = key.split(":", 1)
        column = stamps.node(name) if kind == "v" else stamps.place(key)
        if source.quantity == "v":
            stamps.add(row, column, -slope)
        else:
            stamps.add(stamps.node(plus), column, slope)
            stamps.add(stamps.node(minus), column, -slope)
