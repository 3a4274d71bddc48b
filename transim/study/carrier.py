"""Carrier-resolved runs of a case: the envelope at the real level, and what the RF does to bias and junctions."""

from __future__ import annotations

import os
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np

from transim.circuit.netlist import JunctionPlace, ThrowPlace
from transim.circuit.timeline import Timeline
from transim.engine.rawfile import Plot
from transim.envelope.carrier import extract_envelope
from transim.envelope.junction import Array
from transim.measure.rf import LargeSignal
from transim.measure.waveform import Waveform
from transim.study.case import Case
from transim.study.decks import carrier_decks, carrier_timeline
from transim.study.stress import amplitude_of

__all__ = ["CarrierRun", "run_carrier"]


@dataclass(frozen=True)
class CarrierRun:
    """Carrier-resolved runs of one throw at one carrier and level.

    Attributes
    ----------
    envelope : Waveform
        Complex S of the through pair, on the video run's time axis.
    large : LargeSignal
        Bias, dissipation and levels with the RF on.
    """

    envelope: Waveform
    large: LargeSignal


def run_carrier(
    case: Case, frequency: float, level: float, quiet: Plot | None = None
) -> tuple[tuple[CarrierRun, ...], Plot]:
    """Run the carrier analysis at one carrier and level.

    Parameters
    ----------
    case : Case
        The circuit.
    frequency, level : float
        Carrier [Hz] and available power [dBm].
    quiet : Plot or None
        The run without RF at this carrier, if there is one already.

    Returns
    -------
    runs : tuple of CarrierRun
        One for each throw.
    quiet : Plot
        The run without RF, which other levels share.
    """
    design, netlist = case.design, case.netlist
    timeline = carrier_timeline(design, frequency)
    by_entry = carrier_decks(design, case.driver, case.temperature, frequency, level)
    decks = [deck for several in by_entry.values() for deck in several[:2]]
    if quiet is None:
        decks.append(next(iter(by_entry.values()))[2])
    with ThreadPoolExecutor(max_workers=min(len(decks), os.cpu_count() or 1)) as pool:
        plots = [done.plots[0] for done in pool.map(case.run, decks)]
    quiet = plots[-1] if quiet is None else quiet
    entered = {entry: plots[2 * k : 2 * k + 2] for k, entry in enumerate(by_entry)}
    amplitude = amplitude_of(level, design.carrier.impedance)
    on_video_axis = case.timeline.lead - timeline.lead
    found = []
    for throw in netlist.throws:
        node = f"v({netlist.ports[throw.through[1]].node})"
        first, second = entered[throw.through[0]]
        runs = [(np.real(plot["time"]), np.real(plot[node])) for plot in (first, second, quiet)]
        time, envelope = extract_envelope((runs[0], runs[1], runs[2]), frequency, design.numerics.carrier_points)
        waveform = Waveform(time + on_video_axis, 2.0 * envelope / amplitude, "1")
        large = _large_signal(case, throw, timeline, (first, second, quiet), (frequency, level))
        found.append(CarrierRun(waveform, large))
    return tuple(found), quiet


def _large_signal(
    case: Case, throw: ThrowPlace, timeline: Timeline, plots: tuple[Plot, Plot, Plot], tone: tuple[float, float]
) -> LargeSignal:
    frequency, level = tone
    # three periods before each edge: an even mean without the carrier; of the low state at the end of its interval,
    # as before the first edge the RF's own start-up is still dying away
    span = 3.0 / frequency
    offset = case.timeline.lead - timeline.lead
    end_of_low = case.timeline.stop - offset
    end_of_high = timeline.falling - timeline.edge / 2.0
    shifts = []
    for stop in (end_of_low, end_of_high):
        means = [_mean(plot, f"v({throw.feed.entry})", stop - span, stop) for plot in plots]
        shifts.append(0.5 * (means[0] + means[1]) - means[2])
    low, high = shifts
    powers = {
        place.instance: _period_mean(plots[0], _junction_power(plots[0], place), 1.0 / frequency)
        for place in case.netlist.junctions
    }
    return LargeSignal(
        level=level,
        bias_shift_on=high if throw.passes_high else low,
        bias_shift_off=low if throw.passes_high else high,
        junction_power={name: Waveform(time + offset, power, "W") for name, (time, power) in powers.items()},
    )


def _mean(plot: Plot, name: str, start: float, stop: float) -> float:
    wave = Waveform(np.real(plot["time"]), np.real(plot[name]), "V").between(start, stop)
    return float(np.real(wave.integral())) / (stop - start)


def _junction_power(plot: Plot, place: JunctionPlace) -> Array:
    """Return the power into a junction [W]: every terminal's voltage to the last one times its current."""
    last = list(place.nodes.values())[-1]
    total = np.zeros(plot.data.shape[0])
    for terminal, source in place.ammeters.items():
        total += (_voltage(plot, place.nodes[terminal]) - _voltage(plot, last)) * np.real(plot[f"i({source})"])
    return total


def _voltage(plot: Plot, node: str) -> Array:
    return np.zeros(plot.data.shape[0]) if node == "0" else np.real(plot[f"v({node})"])


def _period_mean(plot: Plot, value: Array, period: float) -> tuple[Array, Array]:
    """Return the mean over one period around each of four instants a period."""
    time = np.real(plot["time"])
    advancing = np.concatenate([[True], np.diff(time) > 0.0])
    time, value = time[advancing], value[advancing]
    area = np.concatenate([[0.0], np.cumsum(0.5 * (value[1:] + value[:-1]) * np.diff(time))])
    centre = np.arange(time[0] + period / 2.0, time[-1] - period / 2.0, period / 4.0)
    ends = [np.interp(centre + shift, time, area) for shift in (-period / 2.0, period / 2.0)]
    return centre, (ends[1] - ends[0]) / period
