"""A carrier-resolved look at the settled states: whether junctions that the RF overcomes by its peak really conduct.

A p-i-n junction may stay off although the RF swings it forward, where carriers have no time to cross its I-region.
Peak and bias alone do not tell, so it is measured, and only where the peak asks for it.
"""

from __future__ import annotations

import math
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace

import numpy as np

from transim.circuit.decks import Tone, carrier_deck
from transim.circuit.netlist import ThrowPlace
from transim.envelope.carrier import extract_envelope
from transim.errors import EngineError
from transim.measure.record import Record
from transim.measure.rf import JunctionRf, RfStress
from transim.quantities import format_quantity
from transim.study.case import Case
from transim.study.decks import carrier_timeline
from transim.study.stress import amplitude_of

__all__ = ["HoldOffProbe"]

#: A junction that swings forward by more than this may conduct [V].
_FORWARD = 0.5
#: Change of the through pair's transmission that is said, as a share of the on level: of the loss, 0.1 dB.
_DEPARTURE = 0.0115
#: Charge gathers over many periods; longer than this is not waited.
_PERIODS = 500.0
#: The last part of a run that is averaged [carrier periods].
_LAST = 10


class HoldOffProbe:
    """Probes of one case at one carrier, from its settled states.

    Parameters
    ----------
    case : Case
        The circuit.
    throw : ThrowPlace
        The way of the RF.
    frequency : float
        Carrier [Hz].
    record : Record
        With S21 of the settled states at small signal.
    """

    def __init__(self, case: Case, throw: ThrowPlace, frequency: float, record: Record) -> None:
        self._case = case
        self._throw = throw
        self._frequency = frequency
        self._static = {"on": abs(record.static_on or 0.0), "off": abs(record.static_off or 0.0)}

    def warnings(self, stress: RfStress) -> tuple[str, ...]:
        """Return what is to be said of junctions that are off; empty where they leave the transmission alone.

        Parameters
        ----------
        stress : RfStress
            At the level.
        """
        found = []
        for state, static in self._static.items():
            off = [junction for junction in stress.junctions if junction.off and junction.state == state]
            worst = max(off, key=lambda junction: junction.voltage - junction.reverse, default=None)
            if worst is None or worst.voltage - worst.reverse <= _FORWARD:
                continue
            try:
                level = self._measure(stress.level, state)
            except EngineError as error:
                # the envelope analysis stands without its probe
                reason = error.message.splitlines()[0]
                found.append(
                    f"at {format_quantity(stress.level, 'dBm')} the RF peak across {worst.junction} is more than its "
                    f"reverse bias while RF is {state}, and a probe of whether it conducts failed ({reason})"
                )
                continue
            if abs(level - static) > _DEPARTURE * self._static["on"]:
                found.append(_sentence(stress.level, worst, 20.0 * math.log10(static / level)))
        return tuple(found)

    def _measure(self, level: float, state: str) -> float:
        """Return |S21| of a settled state with the RF at a level."""
        case, frequency = self._case, self._frequency
        design, netlist = case.design, case.netlist
        control = design.control
        high = self._throw.passes_high == (state == "on")
        interval = control.on_for if high else control.period - control.on_for
        stop = min(interval, _PERIODS / frequency) + 2.0 * _LAST / frequency
        # the command stands still: its first edge lies beyond the end, both of its levels are that of the state
        timeline = replace(carrier_timeline(design, frequency), lead=2.0 * stop, stop=stop, command=())
        held = control.model_copy(update={"low": control.high} if high else {})
        amplitude = amplitude_of(level, design.carrier.impedance)
        first, second = self._throw.through
        name = f"_{self._throw.name}" if self._throw.name else ""
        group = f"holdoff_{format_quantity(frequency, 'Hz', 12)}_{level:g}dBm_{state}{name}".replace(" ", "")
        node = f"v({netlist.ports[second].node})"
        tones = [Tone(frequency, amplitude, phase, first) for phase in (0.0, 90.0)]
        decks = [carrier_deck(netlist, held, timeline, design.numerics, case.origin, tone) for tone in tones]
        with ThreadPoolExecutor(max_workers=2) as pool:
            plots = [done.plots[0] for done in pool.map(case.run, (replace(deck, group=group) for deck in decks))]
        runs = [(np.real(plot["time"]), np.real(plot[node])) for plot in plots]
        # without RF a settled port holds no voltage: it is behind a DC block
        quiet = (np.array([0.0, stop / 3.0, stop / 1.5, stop]), np.zeros(4))
        _, envelope = extract_envelope((runs[0], runs[1], quiet), frequency, design.numerics.carrier_points)
        return 2.0 * abs(complex(np.mean(envelope[-4 * _LAST :]))) / amplitude


def _sentence(level: float, junction: JunctionRf, change: float) -> str:
    figure = "loss" if junction.state == "on" else "isolation"
    return (
        f"at {format_quantity(level, 'dBm')} the RF does not leave {junction.junction} off while RF is "
        f"{junction.state}: its peak of {format_quantity(junction.voltage, 'V')} is more than the reverse bias of "
        f"{format_quantity(junction.reverse, 'V')}, and {figure} moves by {change:+.2g} dB; use --analysis carrier"
    )
