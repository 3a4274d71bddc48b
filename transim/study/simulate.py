"""One driver of a design at one temperature: its decks run, its waveforms measured, its limits judged."""

from __future__ import annotations

import os
from collections.abc import Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
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
from transim.envelope.linearise import Bias, linearise, saved_vectors
from transim.envelope.method import Envelope, solve_envelope
from transim.envelope.stationary import Complex, largest_difference, read_scattering
from transim.measure.limits import Judgement, Verdict, judge, verdict
from transim.measure.metrics import Figure, extract
from transim.measure.record import Record
from transim.measure.waveform import Waveform
from transim.quantities import format_quantity

__all__ = ["CaseRun", "Result", "simulate"]

#: Largest difference between the envelope and ngspice's own AC analysis [dB].
_TOLERATED = 0.05
_CHECKS = {
    "check_start": "before the first edge",
    "check_rise": "half way on the command's rising edge",
    "check_end": "at the end of the pulse",
    "check_fall": "half way on the command's falling edge",
}
#: Carrier periods before the first edge of a carrier run, for its start-up to die away.
_SETTLING_PERIODS = 20.0


@dataclass(frozen=True)
class Result:
    """Figures of one driver at one carrier and temperature, by one analysis.

    Attributes
    ----------
    driver : str
        Name in the design.
    carrier, temperature : float
        [Hz], [degC].
    analysis : str
        ``envelope`` or ``carrier``.
    figures : mapping of str to Figure
        Every metric.
    judgements : tuple of Judgement
        One for each limit of the design.
    method : str
        How the envelope was found, and why so.
    faults : tuple of str
        What makes the figures unfit to be judged; empty in a sound run.
    check : float or None
        Largest difference of the envelope to ngspice's AC analysis at four biases [dB].
    """

    driver: str
    carrier: float
    temperature: float
    analysis: str
    figures: Mapping[str, Figure]
    judgements: tuple[Judgement, ...]
    method: str
    faults: tuple[str, ...] = ()
    check: float | None = None

    @property
    def verdict(self) -> Verdict:
        """Verdict over all limits; undefined where the run has a fault."""
        return "undefined" if self.faults else verdict(self.judgements)


@dataclass(frozen=True)
class CaseRun:
    """Everything that one driver at one temperature gave.

    Attributes
    ----------
    driver : str
        Name in the design.
    temperature : float
        [degC].
    results : tuple of Result
        For each carrier and analysis.
    decks : tuple of Deck
        Every deck that was run.
    video : Plot
        The video run.
    envelopes : mapping
        Complex S21 against time by (analysis, carrier).
    engine_seconds : float
        Time spent in ngspice [s].
    """

    driver: str
    temperature: float
    results: tuple[Result, ...]
    decks: tuple[Deck, ...]
    video: Plot
    envelopes: Mapping[tuple[str, float], Waveform]
    engine_seconds: float


class _Case:
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


def simulate(
    design: Design, driver: Driver, temperature: float, engine: Engine, analyses: Sequence[str]
) -> CaseRun:
    """Simulate one driver at one temperature and all carriers.

    Parameters
    ----------
    design : Design
        The design.
    driver : Driver
        One of its drivers.
    temperature : float
        [degC].
    engine : Engine
        ngspice.
    analyses : sequence of str
        ``envelope``, ``carrier`` or both.

    Returns
    -------
    CaseRun

    Raises
    ------
    EngineError
        If a deck fails.
    LinearisationError
        If the envelope analysis is asked for and an element has no small-signal form.
    """
    case = _Case(design, driver, temperature, engine)
    circuit, states = case.static()
    saved = saved_vectors(circuit) if "envelope" in analyses else ()
    video = case.video(saved)
    vectors = {name: np.real(video.data[:, k]) for k, name in enumerate(video.names)}
    results: list[Result] = []
    envelopes: dict[tuple[str, float], Waveform] = {}
    if "envelope" in analyses:
        _envelope(case, circuit, states, vectors, results, envelopes)
    if "carrier" in analyses:
        _carrier(case, states, vectors, results, envelopes)
    order = {
        (name, f): k for k, (f, name) in enumerate((f, a) for f in design.carrier.frequency for a in analyses)
    }
    results.sort(key=lambda result: order[result.analysis, result.carrier])
    return CaseRun(
        driver.name, temperature, tuple(results), tuple(case.decks), video, envelopes, case.seconds
    )


def _envelope(
    case: _Case,
    circuit: Circuit,
    states: Complex,
    vectors: Mapping[str, Array],
    results: list[Result],
    envelopes: dict[tuple[str, float], Waveform],
) -> None:
    design, netlist = case.design, case.netlist
    frequencies = design.carrier.frequency
    network = linearise(
        circuit, Bias(vectors, vectors["time"]), case.temperature, [p.source for p in netlist.ports]
    )
    solution = solve_envelope(network, netlist.ports, frequencies, netlist.through, design.numerics.solution)
    points = _check_points(case, solution)
    references = {name: case.check(name, circuit, vectors, point) for name, point in points.items()}
    # before the first edge the bias is ngspice's own operating point
    points["check_start"], references["check_start"] = 0, states[0]
    for k, frequency in enumerate(frequencies):
        pair = solution.s[k, :, netlist.through[1], netlist.through[0]]
        waveform = Waveform(solution.time, pair, "1")
        envelopes["envelope", frequency] = waveform
        record = _record(case, case.timeline, frequency, waveform, states[:, k], vectors)
        differences = {
            name: largest_difference(references[name][k], solution.frozen[k, point]) for name, point in points.items()
        }
        method = f"{solution.methods[k]}: {solution.reasons[k]}"
        results.append(_result(case, record, "envelope", method, differences))


def _check_points(case: _Case, solution: Envelope) -> dict[str, int]:
    """Return the points of the video run at which ngspice linearises too: half way on both edges, end of the pulse."""
    timeline, time = case.timeline, solution.time
    first, second = case.netlist.through
    level = np.abs(solution.frozen[0, :, second, first])
    halves = np.flatnonzero(np.diff(level > 0.5 * level.max()))
    points = {}
    for name, start, stop in (
        ("check_rise", timeline.rising, timeline.falling),
        ("check_fall", timeline.falling, timeline.stop),
    ):
        inside = halves[(time[halves] > start) & (time[halves] < stop)]
        if inside.size:
            points[name] = int(inside[0])
    # the command begins to fall half an edge before its 50 % point
    points["check_end"] = int(np.searchsorted(time, timeline.falling - timeline.edge / 2.0, side="right")) - 1
    return points


def _carrier(
    case: _Case,
    states: Complex,
    vectors: Mapping[str, Array],
    results: list[Result],
    envelopes: dict[tuple[str, float], Waveform],
) -> None:
    points = case.design.numerics.carrier_points
    for k, frequency in enumerate(case.design.carrier.frequency):
        timeline, waveform = case.carrier(frequency)
        # on the video run's time axis, so that all waveforms of a record share it
        shift = timeline.lead - case.timeline.lead
        waveform = Waveform(waveform.time - shift, waveform.value, "1")
        envelopes["carrier", frequency] = waveform
        record = _record(case, case.timeline, frequency, waveform, states[:, k], vectors)
        method = f"quadrature of two runs with {points} points a period, less one without RF"
        results.append(_result(case, record, "carrier", method, {}))


def _record(
    case: _Case,
    timeline: Timeline,
    frequency: float,
    envelope: Waveform,
    states: Complex,
    vectors: Mapping[str, Array],
) -> Record:
    """Collect the waveforms of one carrier; `states` has shape (2, p, p), command low first."""
    design, netlist = case.design, case.netlist
    passes = bool(design.switch.path.passes)
    first, second = netlist.through
    on, off = (states[1], states[0]) if passes else (states[0], states[1])
    time = vectors["time"]
    probes: dict[str, dict[str, Waveform]] = {"charge": {}, "reverse": {}}
    for probe in netlist.probes:
        if probe.quantity in probes:
            total = sum((scale * _vector(vectors, name) for scale, name in probe.terms), np.zeros(time.size))
            found = probes[probe.quantity]
            name = probe.junction if probe.junction not in found else f"{probe.junction} {len(found) + 1}"
            found[name] = Waveform(time, np.asarray(total), "C" if probe.quantity == "charge" else "V")
    power = None
    if netlist.supplies:
        rails = [name.removeprefix("vsupply_") for name in netlist.supplies]
        delivered = [-vectors[f"v({rail})"] * vectors[f"i(vsupply_{rail})"] for rail in rails]
        power = Waveform(time, np.sum(delivered, axis=0), "W")
    return Record(
        timing=timeline.timing(passes),
        definitions=design.definitions,
        carrier=frequency,
        impedance=design.carrier.impedance,
        biased_passes=passes,
        envelope=envelope,
        static_on=complex(on[second, first]),
        static_off=complex(off[second, first]),
        match_on=complex(on[first, first]),
        match_off=complex(off[first, first]),
        video={port.node: Waveform(time, vectors[f"v({port.node})"], "V") for port in netlist.ports},
        drive_current=Waveform(time, vectors["i(vdrive)"], "A"),
        supply_power=power,
        junction_charge=probes["charge"],
        junction_reverse=probes["reverse"],
    )


def _vector(vectors: Mapping[str, Array], name: str) -> Array:
    """Find a saved vector; ngspice prints device quantities with the letter of their kind around them."""
    for known in (name, f"i({name})", f"v({name})"):
        if known in vectors:
            return vectors[known]
    raise KeyError(name)


def _result(case: _Case, record: Record, analysis: str, method: str, differences: Mapping[str, float]) -> Result:
    figures = extract(record)
    faults = tuple(
        f"{_CHECKS[name]}, the envelope differs by {format_quantity(difference, 'dB')} from ngspice's AC analysis at "
        f"the same bias; at most {format_quantity(_TOLERATED, 'dB')} is sound"
        for name, difference in differences.items()
        if not difference <= _TOLERATED
    )
    return Result(
        driver=case.origin.driver,
        carrier=record.carrier,
        temperature=case.temperature,
        analysis=analysis,
        figures=figures,
        judgements=judge(figures, case.design.limits),
        method=method,
        faults=faults,
        check=max(differences.values()) if differences else None,
    )
