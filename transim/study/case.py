"""One driver at one temperature: its decks, written and run."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from pathlib import Path

import numpy as np

from transim.circuit.assemble import assemble
from transim.circuit.decks import Deck, Origin, entered_ports, point_deck, static_deck, video_deck
from transim.circuit.elements import Circuit, read_listing
from transim.circuit.netlist import Netlist
from transim.circuit.timeline import Timeline, timeline_of
from transim.design.model import Design, Driver
from transim.engine.ngspice import Engine, EngineRun
from transim.engine.rawfile import Plot
from transim.envelope.bias import Bias
from transim.envelope.check import bias_check_deck
from transim.envelope.junction import Array
from transim.envelope.stationary import Complex, read_scattering
from transim.measure.instants import Instants
from transim.measure.usable import Shortest
from transim.study.attempt import run_deck, run_once

__all__ = ["Case"]

class Case:
    """Decks of one driver and temperature, and what they gave so far."""

    def __init__(self, design: Design, driver: Driver, temperature: float, engine: Engine) -> None:
        self.design = design
        self.driver = driver
        self.engine = engine
        self.temperature = temperature
        self.netlist: Netlist = assemble(design, driver)
        self.timeline: Timeline = timeline_of(design)
        self.origin = Origin(
            design.title, Path(design.source.path or "design").name, driver.name, temperature
        )
        self.decks: list[Deck] = []
        #: What is to be said of decks that needed a second try.
        self.retries: list[str] = []
        #: Every vector of the video run, once it has run, by name.
        self.vectors: dict[str, Array] = {}
        #: Its times.
        self.instants: Instants | None = None
        self.seconds = 0.0
        #: Whether only figures and verdicts are wanted, as in a study.
        self.lean = False
        #: The flattened circuit, once the static deck has run.
        self.circuit: Circuit | None = None
        #: Shortest usable pulse and gap by throw, where they are asked for.
        self.shortest: Mapping[str, Shortest] = {}

    def run(self, deck: Deck, longest: float = math.inf) -> EngineRun:
        """Run a deck and keep it; `longest` shortens the design's time limit [s]."""
        self.decks.append(deck)
        numerics = self.design.numerics
        if longest < numerics.timeout:
            numerics = numerics.model_copy(update={"timeout": longest})
        finished = run_deck(self.engine, deck, numerics)
        done = finished.run
        if finished.retry is not None:
            self.decks[self.decks.index(deck)] = finished.deck
            self.retries.append(finished.retry)
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
        self.circuit = read_listing(done.log)
        return self.circuit, np.stack(states)

    def video(self, saved: Sequence[str]) -> Plot:
        """Return the run of the control pulse without RF."""
        design = self.design
        deck = video_deck(self.netlist, design.control, self.timeline, design.numerics, self.origin, saved)
        return self._kept(self.run(deck).plots[0])

    def point(self, saved: Sequence[str]) -> tuple[Circuit, Complex, Plot]:
        """Return what `static` and `video` return, from one deck; S only of ports that RF enters.

        Raises
        ------
        EngineError
            If the deck fails: there is no second try.
        """
        design, ports, frequencies = self.design, self.netlist.ports, self.design.carrier.frequency
        deck = point_deck(
            self.netlist, design.control, self.timeline, frequencies, design.numerics, self.origin, saved
        )
        done = run_once(self.engine, deck, design.numerics)
        self.decks.append(deck)
        self.seconds += done.seconds
        video, *plots = done.plots
        half = len(plots) // 2
        entered = entered_ports(self.netlist)
        states = [read_scattering(some, ports, frequencies, entered) for some in (plots[:half], plots[half:])]
        self.circuit = read_listing(done.log)
        return self.circuit, np.stack(states), self._kept(video)

    def _kept(self, plot: Plot) -> Plot:
        """Keep the vectors of the video run; each lies in one piece."""
        columns = np.ascontiguousarray(np.real(plot.data).T)
        self.instants = Instants(columns[plot.names.index("time")].copy())
        self.vectors = {name: _from_start(name, columns[k]) for k, name in enumerate(plot.names)}
        # one array for all waveforms of the run, checked once
        self.vectors["time"] = self.instants.time
        return plot

    def check(self, name: str, circuit: Circuit, vectors: Mapping[str, Array], point: int) -> Complex:
        """Return S at the bias of one point of the video run, by ngspice, shape (f, p, p)."""
        here = slice(point, point + 1)
        bias = Bias({vector: values[here] for vector, values in vectors.items()}, vectors["time"][here])
        frequencies = self.design.carrier.frequency
        deck = bias_check_deck(name, circuit, bias, self.netlist.ports, frequencies, self.origin)
        return read_scattering(self.run(deck).plots, self.netlist.ports, frequencies)


def _from_start(name: str, values: Array) -> Array:
    """Return a vector whose first sample counts: ngspice has no charge of a device yet at the start of a transient."""
    if "@" not in name or not name.rstrip(")").endswith(("[charge]", "[qbe]", "[qbc]")) or values.size < 2:
        return values
    return np.concatenate((values[1:2], values[1:]))
