"""The netlist that all decks of one driver share: parts, instances, supplies, ports.

PySpice writes the netlist's lines; nothing else of it is used, and no other module imports it.
"""

from __future__ import annotations

import re
from collections.abc import Mapping

from PySpice.Spice.Netlist import Circuit as SpiceCircuit

from transim.circuit.lossless import without_breakpoints
from transim.circuit.netlist import Feed, JunctionPlace, JunctionProbe, Netlist, RfPort, ThrowPlace
from transim.design.model import Design, Driver, Junction
from transim.errors import TopologyError
from transim.parts.part import Part, Slot
from transim.parts.scope import calls_of
from transim.quantities import deck_number

__all__ = ["assemble"]

#: Node of the inverted command.
_INVERSE = "ctl_inverse"
_VECTOR = re.compile(r"(?P<kind>[vi])\((?P<inside>[^()]*)\)|@(?P<device>[^\[]+)\[(?P<parameter>[^\]]+)\]")


def assemble(design: Design, driver: Driver | None) -> Netlist:
    """Put path, junctions and one driver together; each bias entry has a driver like it.

    Parameters
    ----------
    design : Design
        Read and checked.
    driver : Driver or None
        One of its drivers; None: a current source ``iholding`` of 0 A feeds the bias entry.

    Returns
    -------
    Netlist

    Raises
    ------
    TopologyError
        If there is no driver and the path has several bias entries, or the driver has several outputs.
    """
    path = design.switch.path
    circuit = SpiceCircuit("transim")
    circuit.raw_spice = _subcircuits(design, driver)
    feeds = _feeds(path)
    if driver is None:
        if len(feeds) != 1:
            raise TopologyError(
                f"path {path.name} has {len(feeds)} bias entries, and a holding current is stepped into one alone",
                key="static.bias_sweep",
            )
        circuit.I("holding", circuit.gnd, "drive", "0")
    else:
        _drive(circuit, design, driver, feeds)
    for place, feed in enumerate(feeds):
        # an ammeter: its current is what the driver delivers
        circuit.V(_numbered("drive", place), feed.node, path.bias[place], "0")
    circuit.X("path", path.name, *path.terminals, **_texts(design.switch.values))
    ports = []
    for port in path.ports:
        source = f"e{port}"
        circuit.R(f"port_{port}", source, port, deck_number(design.carrier.impedance))
        ports.append(RfPort(port.lower(), f"vport_{port}".lower(), design.carrier.impedance))
    lines = str(circuit).splitlines()
    body = "\n".join(line for line in lines if line and not line.startswith(".title"))
    throws = _throws(path, feeds)
    supplies = () if driver is None else tuple(f"vsupply_{supply.name}".lower() for supply in driver.part.supplies)
    places = _junctions(design)
    probes = tuple(probe for place in places for probe in _probes(design, place))
    return Netlist(without_breakpoints(body) + "\n", tuple(ports), feeds, throws, places, probes, supplies)


def _numbered(name: str, place: int) -> str:
    """Return a name for the driver of each bias entry: the first has none of the numbers."""
    return name if place == 0 else f"{name}{place + 1}"


def _feeds(path: Part) -> tuple[Feed, ...]:
    return tuple(
        Feed(entry.lower(), _numbered("drive", k), _numbered("vdrive", k), entry in path.inverted)
        for k, entry in enumerate(path.bias)
    )


def _throws(path: Part, feeds: tuple[Feed, ...]) -> tuple[ThrowPlace, ...]:
    several = len(path.throws) > 1
    return tuple(
        ThrowPlace(
            name=throw.name if several else "",
            through=(path.ports.index(throw.through[0]), path.ports.index(throw.through[1])),
            passes_high=throw.passes_high,
            forward=path.forward(throw),
            feed=feeds[path.bias.index(throw.bias)],
        )
        for throw in path.throws
    )


def _drive(circuit: SpiceCircuit, design: Design, driver: Driver, feeds: tuple[Feed, ...]) -> None:
    """Add the supplies, and a driver for each bias entry."""
    shared = {supply.name for supply in driver.part.supplies} & set(design.switch.path.terminals)
    if shared:
        raise TopologyError(
            f"{min(shared)} is a node of the path {design.switch.path.name} and a supply of the driver {driver.name}; "
            "rename one of the two",
            key=f"driver.{driver.name}.part",
        )
    for supply in driver.part.supplies:
        circuit.V(f"supply_{supply.name}", supply.name, circuit.gnd, deck_number(driver.values[supply.name]))
    arguments = {p.name: driver.values[p.name] for p in driver.part.parameters}
    command = {"control_low": design.control.low, "control_high": design.control.high}
    arguments |= {name: command[name] for name in driver.part.reserved}
    if driver.part.outputs != ("out",):
        raise TopologyError(
            f"driver part {driver.part.name} has the outputs {' '.join(driver.part.outputs)}; one named out feeds a "
            "bias entry",
            key=f"driver.{driver.name}.part",
        )
    if any(feed.inverted for feed in feeds):
        # the command's mirror image: low for high, with the same edges
        circuit.V("mirror", "mirror", circuit.gnd, deck_number(design.control.low + design.control.high))
        circuit.VCVS("inverse", _INVERSE, "mirror", "ctl", circuit.gnd, "-1")
    for place, feed in enumerate(feeds):
        own = {"out": feed.node, "ctl": _INVERSE if feed.inverted else "ctl"}
        wires = [own.get(name, name) for name in driver.part.terminals]
        circuit.X(_numbered("driver", place), driver.part.name, *wires, **_texts(arguments))


def _texts(values: Mapping[str, float]) -> dict[str, str]:
    return {name: deck_number(value) for name, value in values.items()}


def _subcircuits(design: Design, driver: Driver | None) -> str:
    """Return the text of every part once, and a subcircuit for each slot that holds the chosen junction."""
    parts: dict[str, str] = {}
    parts[design.switch.path.name] = _body(design.switch.path, None)
    if driver is not None:
        parts[driver.part.name] = _body(driver.part, driver.model)
    for slot in design.switch.path.slots:
        junction = design.switch.junctions[slot.name]
        name = _junction_name(junction)
        parts.setdefault(name, _body(junction.part, junction.model, name))
        parts[f"slot {slot.name}"] = _slot(slot, junction)
    return "".join(parts.values())


def _junction_name(junction: Junction) -> str:
    """Return the subcircuit's name; one with a model card of its own gets a name of its own."""
    return junction.part.name if junction.model is None else f"{junction.part.name}_{junction.name}"


def _body(part: Part, card: str | None, name: str | None = None) -> str:
    text = part.body.rstrip() + "\n"
    if name is not None and name != part.name:
        text = re.sub(rf"(?im)^(\.subckt\s+){re.escape(part.name)}\b", rf"\g<1>{name}", text, count=1)
    if card is None or part.model is None:
        return text
    given = {line.split()[1].lower(): line for line in card.splitlines()}
    for place in part.model.places:
        if place.name in given:
            own = re.compile(rf"(?im)^\.model\s+{re.escape(place.name)}\b.*(?:\n\+.*)*\n")
            # cut and joined, since a replacement template would read backslashes in the card
            found = own.search(text)
            if found is not None:
                text = f"{text[: found.start()]}{given[place.name]}\n{text[found.end() :]}"
    return text


def _slot(slot: Slot, junction: Junction) -> str:
    used = {p.name for p in junction.part.parameters}
    if junction.model is not None and junction.part.model is not None:
        used -= set(junction.part.model.parameters)
    values = " ".join(
        f"{name}={deck_number(junction.values[name])}" for name in junction.values if name in used
    )
    # an ammeter in every terminal but the last, whose current follows from the others
    measured = slot.terminals[:-1]
    ammeters = "".join(f"V{name} {name} {name}_in 0\n" for name in measured)
    inner = [f"{name}_in" if name in measured else name for name in slot.terminals]
    call = f"X1 {' '.join(inner)} {_junction_name(junction)} {values}".rstrip()
    head = f"* junction {junction.name}\n.subckt {slot.name} {' '.join(slot.terminals)}\n"
    return f"{head}{ammeters}{call}\n.ends\n"


def _junctions(design: Design) -> tuple[JunctionPlace, ...]:
    """Find the instances of the slots in the path, with the nodes that they have in the flattened circuit."""
    path = design.switch.path
    slots = {slot.name.lower(): slot for slot in path.slots}
    found = []
    for call in calls_of(path.body, path.file, slots):
        slot = slots[call.name]
        nodes = {
            name.lower(): _path_node(path, node) for name, node in zip(slot.terminals, call.nodes, strict=True)
        }
        ammeters = {name.lower(): f"v.xpath.{call.instance}.v{name.lower()}" for name in slot.terminals[:-1]}
        found.append(JunctionPlace(call.instance, design.switch.junctions[slot.name].name, nodes, ammeters))
    return tuple(found)


def _probes(design: Design, place: JunctionPlace) -> list[JunctionProbe]:
    """Translate the probes of a junction's part to the names of the flattened circuit."""
    part = next(j.part for j in design.switch.junctions.values() if j.name == place.junction)
    wires = dict(zip((name.lower() for name in part.terminals), place.nodes.values(), strict=True))
    found = []
    for probe in part.probes:
        prefix = f"xpath.{place.instance}.x1"
        terms = ((scale, _flattened(vector, prefix, wires)) for scale, vector in probe.terms)
        # ngspice does not save the voltage of ground
        found.append(JunctionProbe(place.instance, probe.quantity, tuple(term for term in terms if term[1] != "v(0)")))
    return found


def _path_node(path: Part, node: str) -> str:
    lower = node.lower()
    if lower in ("0", "gnd"):
        return "0"
    return lower if lower in {name.lower() for name in path.terminals} else f"xpath.{lower}"


def _flattened(vector: str, prefix: str, wires: Mapping[str, str]) -> str:
    match = _VECTOR.fullmatch(vector.replace(" ", "").lower())
    if match is None:
        raise TopologyError(f"probe vector {vector!r} is not understood")
    if match["device"]:
        device = match["device"]
        return f"@{device[0]}.{prefix}.{device}[{match['parameter']}]"
    inside = match["inside"]
    if match["kind"] == "i":
        return f"i({inside[0]}.{prefix}.{inside})"
    return f"v({wires.get(inside, f'{prefix}.{inside}')})"
