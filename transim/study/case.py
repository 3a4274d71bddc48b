"""One driver at one temperature: its decks, written and run."""

from __future__ import annotations

import os
from collections.abc import Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np

from transim.circuit.assemble import Netlist, assemble
from transim.circuit.decks import Deck, Origin, Tone, carrier_deck, static_deck, video_deck
from transim.circuit.elements import Circuit, read_listing
from transim.circuit.timeline import Timeline, timeline_of
from transim.design.model import Design, Driver
from transim.engine.ngspice import Engine, EngineRun
from transim.engine.rawfile import Plot
from transim.envelope.carrier import extract_envelope
from transim.envelope.check import bias_check_deck
from transim.envelope.junction import Array
from transim.envelope.linearise import Bias
from transim.envelope.stationary import Complex, read_scattering
from transim.measure.waveform import Waveform

__all__ = ["Case"]

#: Carrier periods before the first edge of a carrier run, for its start-up to die away.
_SETTLING_PERIODS = 20.0


class Case:
    """Decks of one driver and temperature, and what they gave so far."""

    def __init__(self, design: Design, driver: Driver, temperature: float, engine: Engine) -> None:
        self.design = design
        self.engine = engine
        self.temperature = temperature
        self.netlist: Netlist = assemble(design, driver)
        self.timeline: Timeline = timeline_of(design)
        self.origin = Origin(
            design.title, Path(design.source.path or "design").name, driver.name, temperature
        )
        self.decks: list[Deck] = []
        self.seconds = 0.0

    def run(self, deck: Deck) -> EngineRun:
        """Run a deck and keep it."""
        self.decks.append(deck)
        done = self.engine.run(
            deck.text,
            name=deck.name,
            timeout=self.design.numerics.timeout,
            stop_time=deck.stop,
            writes_raw=deck.writes_raw,
        )
        self.seconds += done.seconds
        return done

    def static(self) -> tuple[Circuit, Complex]:
        """Return the flattened circuit and S in both states, shape (2, f, p, p), command low first."""
        design = self.design
        deck = static_deck(
            self.netlist, design.control, design.carrier.frequency, design.numerics, self.origin
        )
        done = self.run(deck)
        plots = [plot for plot in done.plots if plot.name.startswith("AC")]
        half = len(plots) // 2
        states = [
            read_scattering(some, self.netlist.ports, design.carrier.frequency)
            for some in (plots[:half], plots[half:])
        ]
        return read_listing(done.log), np.stack(states)

    def video(self, saved: Sequence[str]) -> Plot:
        """Return the run of the control pulse without RF."""
        design = self.design
        deck = video_deck(self.netlist, design.control, self.timeline, design.numerics, self.origin, saved)
        return self.run(deck).plots[0]

    def check(self, name: str, circuit: Circuit, vectors: Mapping[str, Array], point: int) -> Complex:
        """Return S at the bias of one point of the video run, by ngspice, shape (f, p, p)."""
        here = slice(point, point + 1)
        bias = Bias({vector: values[here] for vector, values in vectors.items()}, vectors["time"][here])
        frequencies = self.design.carrier.frequency
        deck = bias_check_deck(name, circuit, bias, self.netlist.ports, frequencies, self.origin)
        return read_scattering(self.run(deck).plots, self.netlist.ports, frequencies)

    def carrier(self, frequency: float) -> tuple[Timeline, Waveform]:
        """Return the timeline of carrier-resolved runs and the complex S21 that they give."""
        design, netlist = self.design, self.netlist
        timeline = timeline_of(design, settle=_SETTLING_PERIODS / frequency, overrun=2.0 / frequency)
        # available power of a source of amplitude E behind Z0 is E^2 / 8 Z0
        watts = 1e-3 * 10.0 ** (design.carrier.level / 10.0)
        amplitude = float(np.sqrt(8.0 * watts * design.carrier.impedance))
        first, second = netlist.through
        decks = [
            carrier_deck(
                netlist,
                design.control,
                timeline,
                design.numerics,
                self.origin,
                Tone(frequency, size, phase, first),
            )
            for size, phase in ((amplitude, 0.0), (amplitude, 90.0), (0.0, 0.0))
        ]
        with ThreadPoolExecutor(max_workers=min(3, os.cpu_count() or 1)) as pool:
            plots = [done.plots[0] for done in pool.map(self.run, decks)]
        node = f"v({netlist.ports[second].node})"
        runs = tuple((plot["time"], plot[node]) for plot in plots)
        time, envelope = extract_envelope(runs, frequency, design.numerics.carrier_points)  # type: ignore[arg-type]
        return timeline, Waveform(time, 2.0 * envelope / amplitude, "1")
