"""The envelope's own check: ngspice linearises the circuit at the bias of one instant of the video run.

An operating point does not reproduce a bias in the middle of a transition, so the bias is imposed. Every node that
a nonlinear element touches or is controlled by gets a twin: coupled to it by a capacitor of 1e-5 ohm, held at its
bias through an inductor of 1e12 ohm (both at the lowest carrier). Each nonlinear element sees the bias at DC and the
circuit at the carrier; all independent sources are zero. Series resistances of a device stand outside of it, so that
its inner junctions have the voltages of the instant, whatever charging current flows.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

import numpy as np

from transim.circuit.decks import Deck, Origin, control_block, deck_head
from transim.circuit.elements import Behavioural, Circuit, Device, Opaque
from transim.circuit.netlist import RfPort
from transim.envelope.bias import Bias
from transim.envelope.diode import DiodeLaw
from transim.envelope.linearise import opaque_elements
from transim.envelope.transistor import TransistorLaw
from transim.quantities import deck_number

__all__ = ["bias_check_deck"]


def bias_check_deck(
    name: str, circuit: Circuit, bias: Bias, ports: Sequence[RfPort], frequencies: Sequence[float], origin: Origin
) -> Deck:
    """Write a deck in which ngspice linearises the circuit at a given bias.

    Parameters
    ----------
    name : str
        Stem of its file name.
    circuit : Circuit
        Flattened elements.
    bias : Bias
        Of one point.
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
    imposed = _ImposedBias(
        bias, min(frequencies), origin.temperature, opaque_elements(circuit, origin.temperature)
    )
    body = [*circuit.model_cards]
    body += [text for line in circuit.lines if (text := imposed.rewrite(line, circuit))]
    nodes = " ".join(f"v({port.node})" for port in ports)
    steps = []
    for port in ports:
        steps.append(f"alter {port.source} acmag = 1")
        for frequency in frequencies:
            number = deck_number(frequency)
            steps += [f"ac lin 1 {number} {number}", f"write {name}.raw {nodes}"]
        steps.append(f"alter {port.source} acmag = 0")
    what = [
        f"Check: the flattened circuit at the bias of {float(bias.time[0]):.6e} s of the video run,",
        "every junction held at it by a twin node; AC with 1 V behind each port's impedance in turn.",
    ]
    script = [*control_block(steps), ".end"]
    options = f".options temp={deck_number(origin.temperature)} rshunt=1e12 noacct"
    text = deck_head(name, origin, what, True) + "\n".join([*body, *imposed.lines, options, *script]) + "\n"
    return Deck(name, text, writes_raw=True)


class _ImposedBias:
    """Rewrites listing lines so that nonlinear elements hang on twins of their nodes."""

    def __init__(self, bias: Bias, lowest: float, temperature: float, opaque: Sequence[Opaque]) -> None:
        self.bias = bias
        self.opaque = opaque
        self.temperature = temperature
        # a coupling much better than 1e-5 ohm costs ngspice's matrix the digits of small conductances
        self.capacitance = deck_number(1e5 / (2.0 * math.pi * lowest))
        self.inductance = deck_number(1e12 / (2.0 * math.pi * lowest))
        self.twins: dict[tuple[str, float], str] = {}
        self.lines: list[str] = []

    def twin(self, node: str, voltage: float | None = None) -> str:
        """Return a node coupled to `node` at the carrier and held at a voltage [V], by default the node's own."""
        if node == "0" and voltage is None:
            return "0"
        value = float(self.bias.voltage(node)[0]) if voltage is None else voltage
        if (node, value) not in self.twins:
            k = len(self.twins)
            self.twins[node, value] = f"twin{k}"
            self.lines += [
                f"Ctwin{k} {node} twin{k} {self.capacitance}",
                f"Ltwin{k} twin{k} held{k} {self.inductance}",
                f"Vheld{k} held{k} 0 DC {deck_number(value)}",
            ]
        return self.twins[node, value]

    def rewrite(self, line: str, circuit: Circuit) -> str:
        words = line.split()
        name = words[0].lower() if words else ""
        if not name[:1].isalpha():
            return ""
        if name[0] in "vi":
            return f"{words[0]} {words[1]} {words[2]} DC 0 AC 0"
        for element in self.opaque:
            # the element itself, at its bias: ngspice knows what the envelope has no form of
            if element.name == name and element.rest is not None:
                return f"{words[0]} {' '.join(map(self.twin, element.nodes))} {element.rest}"
        for device in circuit.devices:
            if device.name == name:
                return self._diode(device) if name[0] == "d" else self._transistor(device)
        for source in circuit.behaviourals:
            if source.name == name:
                return self._behavioural(source)
        return line

    def _resistor(self, outer: str, inner: str, resistance: float) -> str:
        """Put a resistance between a node and a new inner node; without one the inner node is the node itself."""
        if not 0.0 < resistance < math.inf:
            return outer
        self.lines.append(f"R{inner} {outer} {inner} {deck_number(resistance)}")
        return inner

    def _model(self, device: Device, changed: Mapping[str, float], without: set[str]) -> str:
        """Write the device's model without its series resistances; return its name."""
        values = {key: value for key, value in device.model.parameters.items() if math.isfinite(value)}
        values = {key: value for key, value in values.items() if key not in without} | dict(changed)
        name = f"{device.name}_inner"
        text = " ".join(f"{key}={deck_number(value)}" for key, value in values.items())
        self.lines.append(f".model {name} {device.model.kind}({text})")
        return name

    def _instance(self, device: Device) -> str:
        return " ".join(f"{key}={deck_number(value)}" for key, value in device.parameters.items())

    def _diode(self, device: Device) -> str:
        law = DiodeLaw(device, self.temperature)
        cathode = device.nodes[1]
        anode = self._resistor(device.nodes[0], f"{device.name}_anode", law.resistance)
        held = float(self.bias.voltage(cathode)[0] + self.bias.device(device.name, "vd")[0])
        model = self._model(device, {}, {"rs"})
        return f"{device.name} {self.twin(anode, held)} {self.twin(cathode)} {model} {self._instance(device)}"

    def _transistor(self, device: Device) -> str:
        law = TransistorLaw(device, self.temperature)
        polarity = -1.0 if device.model.kind == "pnp" else 1.0
        vbe, vbc = (self.bias.device(device.name, name) for name in ("vbe", "vbc"))
        collector, base, emitter = device.nodes[:3]
        drop = law.collector_resistance * self.bias.device(device.name, "ic")
        outer = polarity * (self.bias.voltage(base) - self.bias.voltage(collector) + drop)
        signal = law.small_signal(vbe, vbc, outer)
        inner_b = self._resistor(base, f"{device.name}_base", float(1.0 / signal.base[0]))
        inner_c = self._resistor(collector, f"{device.name}_collector", law.collector_resistance)
        inner_e = self._resistor(emitter, f"{device.name}_emitter", law.emitter_resistance)
        if np.any(signal.c_bx > 0.0):
            self.lines.append(f"C{device.name}_outer {base} {inner_c} {deck_number(float(signal.c_bx[0]))}")
        at_e = float(self.bias.voltage(emitter)[0])
        at_b = at_e + polarity * float(vbe[0])
        at_c = at_b - polarity * float(vbc[0])
        inside = device.model.parameters.get("cjc", 0.0) * device.model.parameters.get("xcjc", 1.0)
        changed = {"cjc": inside, "xcjc": 1.0}
        model = self._model(device, changed, {"rb", "rbm", "irb", "rc", "re", "cjs", "ccs"})
        nodes = f"{self.twin(inner_c, at_c)} {self.twin(inner_b, at_b)} {self.twin(inner_e, at_e)}"
        return f"{device.name} {nodes} {model} {self._instance(device)}"

    def _behavioural(self, source: Behavioural) -> str:
        held = source.law.with_probes(
            lambda node: f"v({self.twin(node)})",
            lambda name: f"(i({name})+({deck_number(float(self.bias.current(name)[0]))}))",
        )
        plus, minus = source.nodes
        if source.quantity == "i":
            return f"{source.name} {self.twin(plus)} {self.twin(minus)} i = {held}"
        # its output stays in the circuit, less its bias, so that the circuit itself has none
        offset = float((self.bias.voltage(plus) - self.bias.voltage(minus))[0])
        return f"{source.name} {plus} {minus} v = ({held})-({deck_number(offset)})"
