"""The decks: complete SPICE text for each analysis, which runs in plain ``ngspice -b`` by itself."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from transim.circuit.assemble import Netlist, RfPort
from transim.circuit.elements import Behavioural, Circuit
from transim.circuit.timeline import Timeline
from transim.design.model import Control, Numerics
from transim.quantities import deck_number, format_quantity

__all__ = ["Deck", "Origin", "bias_check_deck", "carrier_deck", "static_deck", "video_deck"]

_UNITS = "Units: V, A, s, Hz, ohm, F, H, C; node 0 is ground; the driver's current is i(vdrive), positive into the bias entry."


@dataclass(frozen=True)
class Origin:
    """Where a deck comes from: title and file of the design, driver, temperature [degC]."""

    title: str
    file: str
    driver: str
    temperature: float


@dataclass(frozen=True)
class Deck:
    """A deck.

    Attributes
    ----------
    name : str
        Stem of its file name.
    text : str
        The deck.
    writes_raw : bool
        Whether its own control block writes NAME.raw; otherwise ngspice's option ``-r`` does.
    stop : float or None
        End of a transient [s].
    """

    name: str
    text: str
    writes_raw: bool
    stop: float | None = None


def _head(name: str, origin: Origin, what: Sequence[str], writes_raw: bool) -> str:
    option = "" if writes_raw else f" -r {name}.raw"
    lines = [
        f"* transim {name} deck",
        f"* design: {origin.title} ({origin.file})",
        f"* driver: {origin.driver}; temperature: {format_quantity(origin.temperature, 'degC')}",
        *(f"* {line}" for line in what),
        f"* {_UNITS}",
        f"* Run: ngspice -b{option} {name}.cir",
    ]
    return "\n".join(lines) + "\n"


def _options(numerics: Numerics, temperature: float, method: str) -> str:
    return (
        f".options reltol={deck_number(numerics.reltol)} method={method} noacct\n"
        f".options temp={deck_number(temperature)}\n"
    )


def _command(control: Control, timeline: Timeline) -> str:
    """Return the command source; its 0 to 100 % edges are centred on the timeline's 50 % points."""
    times = (
        timeline.lead - timeline.edge / 2.0,
        timeline.edge,
        timeline.edge,
        timeline.on_for - timeline.edge,
        timeline.period,
    )
    text = " ".join(map(deck_number, (control.low, control.high, *times)))
    return f"Vcontrol ctl 0 DC {deck_number(control.low)} PULSE({text})\n"


def _quiet_ports(ports: Sequence[RfPort]) -> str:
    return "".join(f"{port.source} e{port.node} 0 DC 0 AC 0\n" for port in ports)


def static_deck(
    netlist: Netlist, control: Control, frequencies: Sequence[float], numerics: Numerics, origin: Origin
) -> Deck:
    """Write the deck of both control states: operating point and S-parameters.

    Its raw file holds, for the command low and then high, one operating point and then one AC plot for each
    port (excited with 1 V behind its impedance) and frequency.

    Parameters
    ----------
    netlist : Netlist
        The circuit.
    control : Control
        Levels of the command.
    frequencies : sequence of float
        Carriers [Hz].
    numerics : Numerics
        Tolerance.
    origin : Origin
        For the head.

    Returns
    -------
    Deck
    """
    what = [
        "Static: both control states; operating point, then AC with 1 V behind each port's impedance in turn.",
        f"S of ports i, j from the plots: 2 v(p_i) - (1 if i = j), both ports at {format_quantity(netlist.ports[0].impedance, 'ohm')}.",
    ]
    nodes = " ".join(f"v({port.node})" for port in netlist.ports)
    steps = []
    for port in netlist.ports:
        steps.append(f"  alter {port.source} acmag = 1")
        for frequency in frequencies:
            number = deck_number(frequency)
            steps += [f"  ac lin 1 {number} {number}", f"  write static.raw {nodes}"]
        steps.append(f"  alter {port.source} acmag = 0")
    script = "\n".join(
        [
            ".control",
            "listing expand",
            "set filetype=binary",
            "set appendwrite",
            f"foreach level {deck_number(control.low)} {deck_number(control.high)}",
            "  alter vcontrol dc = $level",
            "  op",
            "  write static.raw all",
            *steps,
            "end",
            "quit 0",
            ".endc",
        ]
    )
    text = (
        _head("static", origin, what, True)
        + netlist.text
        + f"Vcontrol ctl 0 DC {deck_number(control.low)}\n"
        + _quiet_ports(netlist.ports)
        + _options(numerics, origin.temperature, "gear")
        + script
        + "\n.end\n"
    )
    return Deck("static", text, writes_raw=True)


def video_deck(
    netlist: Netlist,
    control: Control,
    timeline: Timeline,
    numerics: Numerics,
    origin: Origin,
    saved: Sequence[str] = (),
) -> Deck:
    """Write the deck of the control pulse without RF.

    Parameters
    ----------
    netlist : Netlist
        The circuit.
    control : Control
        Levels of the command.
    timeline : Timeline
        Times of the command.
    numerics : Numerics
        Tolerance and step limit.
    origin : Origin
        For the head.
    saved : sequence of str
        Device vectors to save beside all node voltages and branch currents.

    Returns
    -------
    Deck
    """
    step = timeline.on_for / numerics.steps
    what = ["Video: control pulse on, RF sources off; transient. Leakage is the voltage at the RF ports."]
    text = (
        _head("video", origin, what, False)
        + netlist.text
        + _command(control, timeline)
        + _quiet_ports(netlist.ports)
        + _options(numerics, origin.temperature, "gear")
        + f".save all {' '.join(dict.fromkeys((*netlist.saved, *saved)))}".rstrip()
        + f"\n.tran {deck_number(step)} {deck_number(timeline.stop)} 0 {deck_number(step)}\n.end\n"
    )
    return Deck("video", text, writes_raw=False, stop=timeline.stop)


@dataclass(frozen=True)
class Tone:
    """RF source of a carrier deck: frequency [Hz], amplitude of the source's voltage [V], phase [deg], and its port's place."""

    frequency: float
    amplitude: float
    phase: float
    port: int


def carrier_deck(
    netlist: Netlist, control: Control, timeline: Timeline, numerics: Numerics, origin: Origin, tone: Tone
) -> Deck:
    """Write a carrier-resolved deck.

    Parameters
    ----------
    netlist : Netlist
        The circuit.
    control : Control
        Levels of the command.
    timeline : Timeline
        Times of the command.
    numerics : Numerics
        Tolerance and points per carrier period.
    origin : Origin
        For the head.
    tone : Tone
        The carrier; amplitude 0 gives the run without RF that is subtracted.

    Returns
    -------
    Deck
    """
    step = 1.0 / (tone.frequency * numerics.carrier_points)
    name = "carrier_quiet" if tone.amplitude == 0.0 else f"carrier_{tone.phase:.0f}"
    what = [
        f"Carrier: control pulse on, RF source at port {netlist.ports[tone.port].node} on at "
        f"{format_quantity(tone.frequency, 'Hz')}, {format_quantity(tone.amplitude, 'V')} peak behind its impedance, "
        f"cosine with a phase of {tone.phase:.0f} deg; transient, carrier resolved."
    ]
    sources = ""
    for k, port in enumerate(netlist.ports):
        drive = ""
        if k == tone.port:
            values = (0.0, tone.amplitude, tone.frequency, 0.0, 0.0, tone.phase + 90.0)
            drive = f" SIN({' '.join(map(deck_number, values))})"
        sources += f"{port.source} e{port.node} 0 DC 0{drive}\n"
    nodes = " ".join(f"v({port.node})" for port in netlist.ports)
    text = (
        _head(name, origin, what, False)
        + netlist.text
        + _command(control, timeline)
        + sources
        + _options(numerics, origin.temperature, "trap")
        + ".options vntol=1e-9 abstol=1e-14 chgtol=1e-18\n"
        + f".save v(ctl) {nodes} i(vdrive) {' '.join(netlist.saved)}".rstrip()
        + f"\n.tran {deck_number(step)} {deck_number(timeline.stop)} 0 {deck_number(step)}\n.end\n"
    )
    return Deck(name, text, writes_raw=False, stop=timeline.stop)


def bias_check_deck(
    circuit: Circuit,
    bias: Mapping[str, float],
    ports: Sequence[RfPort],
    frequencies: Sequence[float],
    origin: Origin,
) -> Deck:
    """Write a deck in which ngspice itself linearises the circuit at a given bias.

    Every node that a nonlinear element touches or is controlled by gets a twin: coupled to it by a capacitor of
    1e-5 ohm, held at its bias through an inductor of 1e12 ohm (both at the lowest carrier), so that each nonlinear element sees the bias at DC and the circuit at the carrier. All
    independent sources are zero. This reproduces the bias of any instant of a transient, which an operating
    point does not.

    Parameters
    ----------
    circuit : Circuit
        Flattened elements.
    bias : mapping
        ``v(node)`` [V] and ``i(source)`` [A] at the instant.
    ports : sequence of RfPort
        RF ports.
    frequencies : sequence of float
        Carriers [Hz].
    origin : Origin
        For the head.

    Returns
    -------
    Deck
        Its raw file holds one AC plot for each port and frequency.
    """
    twins = _Twins(bias, min(frequencies))
    body = [twins.rewrite(line, circuit) for line in circuit.lines]
    nodes = " ".join(f"v({port.node})" for port in ports)
    steps = []
    for port in ports:
        steps.append(f"alter {port.source} acmag = 1")
        for frequency in frequencies:
            number = deck_number(frequency)
            steps += [f"ac lin 1 {number} {number}", f"write check.raw {nodes}"]
        steps.append(f"alter {port.source} acmag = 0")
    what = [
        "Check: the flattened circuit at the bias of one instant of the video run, every junction held at it; AC at each port."
    ]
    text = (
        _head("check", origin, what, True)
        + "\n".join(line for line in body if line)
        + "\n"
        + twins.text()
        + f".options temp={deck_number(origin.temperature)} rshunt=1e12 noacct\n"
        + "\n".join([".control", "set filetype=binary", "set appendwrite", *steps, "quit 0", ".endc", ".end"])
        + "\n"
    )
    return Deck("check", text, writes_raw=True)


class _Twins:
    """Rewrites listing lines so that nonlinear elements hang on twins of their nodes."""

    def __init__(self, bias: Mapping[str, float], lowest: float) -> None:
        self.bias = bias
        # a coupling much better than 1e-5 ohm costs ngspice's matrix the digits of small conductances
        self.capacitance = deck_number(1e5 / (2.0 * math.pi * lowest))
        self.inductance = deck_number(1e12 / (2.0 * math.pi * lowest))
        self.held: dict[str, None] = {}

    def twin(self, node: str) -> str:
        if node in ("0", "gnd"):
            return "0"
        self.held.setdefault(node)
        return f"{node}_held"

    def text(self) -> str:
        lines = []
        for k, node in enumerate(self.held):
            value = deck_number(self.bias[f"v({node})"])
            lines += [
                f"Cheld{k} {node} {node}_held {self.capacitance}",
                f"Lheld{k} {node}_held held{k} {self.inductance}",
                f"Vheld{k} held{k} 0 DC {value}",
            ]
        return "\n".join(lines) + "\n"

    def rewrite(self, line: str, circuit: Circuit) -> str:
        name = line.split()[0].lower() if line.split() else ""
        if name.startswith("."):
            return line if name == ".model" else ""
        if name[:1] in "vi" and name[:1].isalpha():
            words = line.split()
            return f"{words[0]} {words[1]} {words[2]} DC 0 AC 0"
        for device in circuit.devices:
            if device.name == name:
                words = line.split()
                count = len(device.nodes)
                return " ".join(
                    [
                        words[0],
                        *(self.twin(word.lower()) for word in words[1 : count + 1]),
                        *words[count + 1 :],
                    ]
                )
        for source in circuit.behaviourals:
            if source.name == name:
                return self._behavioural(source)
        return line if name[:1].isalpha() else ""

    def _behavioural(self, source: Behavioural) -> str:
        law = source.law
        held = law.with_probes(
            lambda node: f"v({self.twin(node)})",
            lambda name: f"(i({name}) + {deck_number(self.bias[f'i({name})'])})",
        )
        plus, minus = source.nodes
        if source.quantity == "i":
            return f"{source.name} {self.twin(plus)} {self.twin(minus)} i = {held}"
        # the output of a voltage source stays in the circuit, less its bias, so that the circuit itself has none
        offset = (0.0 if plus == "0" else self.bias[f"v({plus})"]) - (
            0.0 if minus == "0" else self.bias[f"v({minus})"]
        )
        return f"{source.name} {plus} {minus} v = ({held}) - ({deck_number(offset)})"
