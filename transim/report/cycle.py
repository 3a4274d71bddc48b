"""The judged cycle of one case as traces to look at: command, driver, junctions, leakage, RF envelope."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from transim.circuit.assemble import assemble
from transim.circuit.netlist import Netlist, ThrowPlace
from transim.circuit.timeline import timeline_of
from transim.design.model import Design
from transim.measure.definitions import Definitions, Timing
from transim.measure.spectrum import fourier_integral
from transim.measure.sweep import StaticSweep
from transim.quantities import format_quantity
from transim.report.trace import Trace
from transim.report.waveforms import drive_name, video_waveforms
from transim.study.result import CaseRun, Result
from transim.study.run import Outcome

__all__ = ["Cycle", "cycles_of", "edge_span", "lead_in"]

Array = npt.NDArray[np.float64]

#: A trace counts as moving while it is further from its end value than this share of its range.
_MOVING = 0.02


@dataclass(frozen=True, eq=False)
class Cycle:
    """What one driver and throw did at one temperature in the judged cycle.

    Attributes
    ----------
    title : str
        Of the design.
    driver : str
        Name in the design.
    throw : str
        Name of the throw; empty where the path has a single way.
    temperature : float
        [degC].
    several : bool
        Whether the design has more temperatures than this.
    timing : Timing
        Instants of the command; zero is the 50 % point of its rising edge.
    impedance : float
        Of every RF port [ohm].
    definitions : Definitions
        What the figures are counted from.
    control, drive_voltage, drive_current : Trace
        Command [V]; voltage [V] and current [A] where the driver of the throw feeds the path.
    charges, currents, reverses : tuple of Trace
        Of the junctions [C], [A], [V].
    ports : tuple of Trace
        Voltage at each RF port without RF [V].
    pair : tuple of str
        Names of the two ports whose transmission is judged.
    envelopes : mapping
        Complex S21 by (analysis, carrier).
    results : tuple of Result
        Figures for each carrier and analysis.
    static : StaticSweep or None
        Both settled states against frequency, where the design asks for it.
    """

    title: str
    driver: str
    throw: str
    temperature: float
    several: bool
    timing: Timing
    impedance: float
    definitions: Definitions
    control: Trace
    drive_voltage: Trace
    drive_current: Trace
    charges: tuple[Trace, ...]
    currents: tuple[Trace, ...]
    reverses: tuple[Trace, ...]
    ports: tuple[Trace, ...]
    pair: tuple[str, ...]
    envelopes: Mapping[tuple[str, float], Trace]
    results: tuple[Result, ...]
    static: StaticSweep | None = None

    @property
    def leaking(self) -> tuple[Trace, ...]:
        """The ports whose leakage is judged: all, or of several throws the own two."""
        return tuple(port for port in self.ports if port.name in self.pair) if self.throw else self.ports

    @property
    def label(self) -> str:
        """Driver, and throw where there are several."""
        return f"{self.driver} {self.throw}".rstrip()

    @property
    def name(self) -> str:
        """Driver, throw and temperature, as far as there are several."""
        if not self.several:
            return self.label
        return f"{self.label}, {format_quantity(self.temperature, 'degC', 12)}"

    def edge(self, edge: str) -> float:
        """Return the 50 % point of an edge of the command.

        Parameters
        ----------
        edge : {"on", "off"}
            The edge that lets the RF pass, or the one that blocks it.

        Returns
        -------
        float
            [s].
        """
        return self.timing.on_edge if edge == "on" else self.timing.off_edge

    def window(self, edge: str) -> tuple[float, float]:
        """Return the interval of an edge, up to the next one.

        Parameters
        ----------
        edge : {"on", "off"}
            Which edge.

        Returns
        -------
        tuple of float
            [s].
        """
        return self.timing.on_window() if edge == "on" else self.timing.off_window()

    def result(self, analysis: str, carrier: float) -> Result | None:
        """Return the figures at a carrier.

        Parameters
        ----------
        analysis : str
            ``envelope`` or ``carrier``.
        carrier : float
            [Hz].

        Returns
        -------
        Result or None
            None where that was not run.
        """
        found = (result for result in self.results if (result.analysis, result.carrier) == (analysis, carrier))
        return next(found, None)

    def value(self, metric: str, analysis: str, carrier: float) -> float | None:
        """Return one figure.

        Parameters
        ----------
        metric, analysis : str
            Its name, and how the envelope was found.
        carrier : float
            [Hz].

        Returns
        -------
        float or None
            In SI; None where it is undefined.
        """
        result = self.result(analysis, carrier)
        figure = None if result is None else result.figures.get(metric)
        return None if figure is None else figure.value

    def full_level(self, analysis: str, carrier: float) -> float | None:
        """Return |S21| of the full-on level, by the definitions.

        Parameters
        ----------
        analysis : str
            ``envelope`` or ``carrier``.
        carrier : float
            [Hz].

        Returns
        -------
        float or None
            None where it is not known.
        """
        if self.definitions.reference == "end_of_pulse":
            envelope = self.envelopes[analysis, carrier]
            # as the metrics: an average over one carrier period must not see the next edge
            end = self.window("on")[1] - (1.0 / carrier if analysis == "carrier" else 0.0)
            return float(np.interp(end, envelope.time, np.abs(envelope.value)))
        loss = self.value("insertion_loss", analysis, carrier)
        return None if loss is None else float(10.0 ** (-loss / 20.0))

    def leakage_power(self, port: Trace, frequencies: Array) -> Array:
        """Return the mean power of the leakage in the resolution bandwidth.

        Parameters
        ----------
        port : Trace
            Voltage at an RF port [V].
        frequencies : ndarray, shape (n,)
            Where [Hz].

        Returns
        -------
        ndarray, shape (n,)
            [dBm].

        Notes
        -----
        As `video_inband`: a line of the repetition rate P carries 2 (P |V(f)|)^2/Z0, V(f) the Fourier integral
        of one cycle less its voltage at the end; times max(1, B/P) in the resolution bandwidth B.
        """
        cycle = port.between(self.timing.start, self.timing.stop)
        rate, moved = 1.0 / self.timing.period, cycle.value.real - cycle.value.real[-1]
        size = np.array([abs(fourier_integral(cycle.time, moved, float(f))) for f in frequencies])
        power = 2.0 * (rate * size) ** 2 / self.impedance
        power = power * max(1.0, self.definitions.resolution_bandwidth / rate)
        return np.asarray(10.0 * np.log10(np.maximum(power, 1e-30) / 1e-3))


def cycles_of(outcome: Outcome) -> tuple[Cycle, ...]:
    """Return the judged cycle of every case and throw.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    tuple of Cycle
        In the order of the cases.
    """
    return tuple(cycle for case in outcome.cases for cycle in _cycles(outcome, case))


def _cycles(outcome: Outcome, case: CaseRun) -> Iterator[Cycle]:
    design = outcome.design
    driver = next(driver for driver in design.drivers if driver.name == case.driver)
    netlist = assemble(design, driver)
    waves = video_waveforms(case.video, netlist)
    for throw in netlist.throws:
        yield _cycle(design, case, netlist, throw, waves)


def _cycle(
    design: Design, case: CaseRun, netlist: Netlist, throw: ThrowPlace, waves: Mapping[str, tuple[Array, str]]
) -> Cycle:
    run = case.throw(throw.name)
    timeline = timeline_of(design)
    timing = timeline.timing(throw.passes_high)
    zero = timeline.rising
    time = waves["time"][0] - zero

    def trace(key: str, name: str) -> Trace:
        samples, unit = waves[key]
        return Trace(name, unit, time, samples).between(timing.start - zero, timing.stop - zero)

    def group(prefix: str) -> tuple[Trace, ...]:
        return tuple(trace(key, key.removeprefix(prefix)) for key in waves if key.startswith(prefix))

    envelopes = {
        key: Trace(_envelope_label(*key), "1", wave.time - zero, wave.value) for key, wave in run.envelopes.items()
    }
    return Cycle(
        title=design.title,
        driver=case.driver,
        throw=run.name,
        temperature=case.temperature,
        several=len(design.environment.temperature) > 1,
        timing=Timing(
            on_edge=timing.on_edge - zero,
            off_edge=timing.off_edge - zero,
            edge=timing.edge,
            start=timing.start - zero,
            stop=timing.stop - zero,
            period=timing.period,
        ),
        impedance=design.carrier.impedance,
        definitions=design.definitions,
        control=trace("control", "command"),
        drive_voltage=trace(drive_name("voltage", throw), "driver output"),
        drive_current=trace(drive_name("current", throw), "driver output"),
        charges=group("charge_"),
        currents=group("current_"),
        reverses=group("reverse_"),
        ports=group("port_"),
        pair=tuple(netlist.ports[place].node for place in sorted(throw.through)),
        envelopes=envelopes,
        results=tuple(result for result in case.results if result.throw == run.name),
        static=run.static,
    )


def _envelope_label(analysis: str, carrier: float) -> str:
    text = format_quantity(carrier, "Hz", 12)
    return f"{text}, resolved" if analysis == "carrier" else text


def edge_span(cycle: Cycle, edge: str, traces: Sequence[Trace], metrics: Sequence[float | None] = ()) -> float:
    """Return how long after an edge there is something to see.

    Parameters
    ----------
    cycle : Cycle
        The cycle.
    edge : {"on", "off"}
        Which edge.
    traces : sequence of Trace
        Real traces that are shown.
    metrics : sequence of float or None
        Instants that must be in sight, counted from the edge [s].

    Returns
    -------
    float
        From the edge's 50 % point [s]: until every trace stays within 2 % of its range around its end value.
    """
    start, stop = cycle.window(edge)
    zero = cycle.edge(edge)
    last = [2.0 * cycle.timing.edge, *(value for value in metrics if value is not None)]
    for trace in traces:
        part = trace.between(start, stop)
        value = part.value.real
        away = np.flatnonzero(np.abs(value - value[-1]) > _MOVING * np.ptp(trace.value.real))
        if away.size:
            last.append(float(part.time[min(away[-1] + 1, value.size - 1)]) - zero)
    return float(min(1.15 * max(last), stop - zero))


def lead_in(cycle: Cycle, edge: str, span: float) -> float:
    """Return where a look at an edge begins.

    Parameters
    ----------
    cycle : Cycle
        The cycle.
    edge : {"on", "off"}
        Which edge.
    span : float
        How long after the edge the look ends [s].

    Returns
    -------
    float
        From the edge's 50 % point, negative [s]: a tenth of `span`, but never before the cycle.
    """
    return max(-0.1 * span, cycle.timing.start - cycle.edge(edge))
