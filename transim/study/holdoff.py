"""A carrier-resolved look at the settled states: whether junctions that the RF overcomes by its peak really conduct.

A p-i-n junction may stay off although the RF swings it forward, where carriers have no time to cross its I-region.
Peak and bias alone do not tell, so it is measured, and only where the peak asks for it.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from transim.circuit.decks import Tone, carrier_deck
from transim.envelope.carrier import extract_envelope
from transim.measure.rf import JunctionRf, RfStress
from transim.quantities import format_quantity
from transim.study.case import Case
from transim.study.decks import carrier_timeline
from transim.study.stress import amplitude_of

__all__ = ["HoldOffProbe"]

#: A junction that swings forward by more than this may conduct [V].
_FORWARD = 0.5
#: Departures from small signal that are said: of the loss while RF is on, of the isolation while it is off [dB].
_DEPARTURE = {"on": 0.1, "off": 1.0}
#: Charge gathers over many periods; longer than this is not waited.
_PERIODS = 1000.0
#: The last part of a run that is averaged [carrier periods].
_LAST = 10


class HoldOffProbe:
    """Probes of one case at one carrier, from its settled states.

    Parameters
    ----------
    case : Case
        The circuit.
    frequency : float
        Carrier [Hz].
    static : mapping of str to complex
        S21 of the settled states ``on`` and ``off``, at small signal.
    """

    def __init__(self, case: Case, frequency: float, static: dict[str, complex]) -> None:
        self._case = case
        self._frequency = frequency
        self._static = static

    def warnings(self, stress: RfStress) -> tuple[str, ...]:
        """Return what is to be said of junctions that are off; empty where the RF leaves loss and isolation alone.

        Parameters
        ----------
        stress : RfStress
            At the level.
        """
        found = []
        for state, bound in _DEPARTURE.items():
            off = [junction for junction in stress.junctions if junction.off and junction.state == state]
            worst = max(off, key=lambda junction: junction.voltage - junction.reverse, default=None)
            if worst is None or worst.voltage - worst.reverse <= _FORWARD:
                continue
            change = self._measure(stress.level, state)
            if abs(change) > bound:
                found.append(_sentence(stress.level, worst, change))
        return tuple(found)

    def _measure(self, level: float, state: str) -> float:
        """Return by how much the RF at a level changes the attenuation of a settled state [dB]."""
        case, frequency = self._case, self._frequency
        design, netlist = case.design, case.netlist
        control = design.control
        high = bool(design.switch.path.passes) == (state == "on")
        interval = control.on_for if high else control.period - control.on_for
        stop = min(interval, _PERIODS / frequency) + 2.0 * _LAST / frequency
        # the command stands still: its first edge lies beyond the end, both of its levels are that of the state
        timeline = replace(carrier_timeline(design, frequency), lead=2.0 * stop, stop=stop)
        held = control.model_copy(update={"low": control.high} if high else {})
        amplitude = amplitude_of(level, design.carrier.impedance)
        first, second = netlist.through
        group = f"holdoff_{format_quantity(frequency, 'Hz', 12)}_{level:g}dBm_{state}".replace(" ", "")
        node = f"v({netlist.ports[second].node})"
        runs = []
        for phase in (0.0, 90.0):
            tone = Tone(frequency, amplitude, phase, first)
            deck = carrier_deck(netlist, held, timeline, design.numerics, case.origin, tone)
            plot = case.run(replace(deck, group=group)).plots[0]
            runs.append((np.real(plot["time"]), np.real(plot[node])))
        # without RF a settled port holds no voltage: it is behind a DC block
        quiet = (np.array([0.0, stop / 3.0, stop / 1.5, stop]), np.zeros(4))
        _, envelope = extract_envelope((runs[0], runs[1], quiet), frequency, design.numerics.carrier_points)
        settled = 2.0 * abs(complex(np.mean(envelope[-4 * _LAST :]))) / amplitude
        return -20.0 * math.log10(settled / abs(self._static[state]))


def _sentence(level: float, junction: JunctionRf, change: float) -> str:
    figure = "loss" if junction.state == "on" else "isolation"
    return (
        f"at {format_quantity(level, 'dBm')} the RF does not leave {junction.junction} off while RF is "
        f"{junction.state}: its peak of {format_quantity(junction.voltage, 'V')} is more than the reverse bias of "
        f"{format_quantity(junction.reverse, 'V')}, and {figure} moves by {change:+.2g} dB; use --analysis carrier"
    )
