"""Figures of a record, each with its standard uncertainty.

Five contributions are added in squares; nothing is said about the oscilloscope's own errors of gain and time base.

noise
    The smooth traces are taken as true; noise as large as was found in each cell, quantisation included, is added to
    them, everything is measured again, 60 times: a quarter of the central 95 % of what comes out, and the distance of
    its median from the figure (what the smoothing shifts, it shifts again). To first order this is the noise at the
    crossing over the slope there, with the noise of both levels and of the command's edge. It counts 1.25 times,
    because the cells were chosen by the same noise; the factor was found on synthesised records.
smoothing
    What changes when the neighbourhood that traces are smoothed over is half as long.
sampling
    A third of what changes when every second cell is left out: the error of straight lines between samples goes with
    the square of their distance. For a carrier, besides, what an average over one more period changes.
level
    What changes when the on level is taken from the end of the on interval, extended to where the RF would settle if it
    went on approaching its level exponentially.
step of the converter
    Where the noise is too small against it to be averaged, the repeated traces are shifted by up to half a step, anew
    at every second step.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from transim.bench.cycle import Cycle
from transim.bench.trace import Samples, Smoother, Trace
from transim.errors import MeasurementError
from transim.measure.metrics import Figure, extract

__all__ = ["Estimate", "measure_cycle"]

#: How often noise is added and everything measured again.
REPLICATES = 60
#: What the scatter of the repetitions is multiplied with.
_CHOICE = 1.25
#: Share of the repetitions that a figure must exist in, and below which its range counts in full.
_REPEATABLE, _SURE = 0.5, 0.9


@dataclass(frozen=True)
class Estimate:
    """A figure with its uncertainty.

    Attributes
    ----------
    figure : Figure
        Value, unit and note.
    uncertainty : float or None
        Standard uncertainty, one sigma, in the same unit; None where there is no value or it is not repeatable.
    parts : mapping of str to float
        The contributions, in the same unit.
    """

    figure: Figure
    uncertainty: float | None
    parts: Mapping[str, float]


def measure_cycle(cycle: Cycle, *, replicates: int = REPLICATES, seed: int = 181) -> dict[str, Estimate]:
    """Take all figures of a recorded cycle.

    Parameters
    ----------
    cycle : Cycle
        The record.
    replicates : int
        Repetitions with noise.
    seed : int
        Of the noise that is added; the same record gives the same figures.

    Returns
    -------
    dict of str to Estimate
        By metric.

    Raises
    ------
    MeasurementError
        If the RF has one level only.
    """
    smooth = cycle.smooth()
    generator = np.random.default_rng(seed)
    repeated = [_repeat(cycle, smooth, generator) for _ in range(replicates)]
    narrow = {name: Smoother(trace, 2.0) for name, trace in cycle.traces.items()}
    variants = {"smoothing": [_values(cycle, cycle.smooth(narrow))], "level": [_values(cycle, smooth, at_end=True)]}
    variants["sampling"] = [_values(cycle, smooth, thin=slice(k, None, 2)) for k in (0, 1)]
    if cycle.averaged:
        blurred = {name: _blur(value) if name != "command" else value for name, value in smooth.items()}
        variants["averaging"] = [_values(cycle, blurred)]
    figures = extract(cycle.record(smooth))
    return {name: _estimate(name, figure, repeated, variants) for name, figure in figures.items()}


def _estimate(
    name: str,
    figure: Figure,
    repeated: Sequence[Mapping[str, float]],
    variants: Mapping[str, Sequence[Mapping[str, float]]],
) -> Estimate:
    if figure.value is None:
        return Estimate(figure, None, {})
    found = np.array([values[name] for values in repeated if name in values])
    if found.size < _REPEATABLE * len(repeated):
        note = f"lost in the noise: found in {found.size} of {len(repeated)} repetitions with noise like the record's"
        return Estimate(Figure(None, figure.unit, note), None, {})
    low, middle, high = np.quantile(found, (0.025, 0.5, 0.975)) if found.size else (figure.value,) * 3
    noise = float(high - low) / 4.0 if found.size >= _SURE * len(repeated) else float(np.ptp(found)) / 2.0
    parts = {"noise": _CHOICE * noise, "bias": float(abs(middle - figure.value))}
    for kind, results in variants.items():
        changes = [abs(values[name] - figure.value) for values in results if name in values]
        if changes:
            parts[kind] = float(np.mean(changes)) / (3.0 if kind == "sampling" else 1.0)
    return Estimate(figure, math.sqrt(sum(part * part for part in parts.values())), parts)


def _values(
    cycle: Cycle, smooth: Mapping[str, Samples], *, thin: slice | None = None, at_end: bool = False
) -> dict[str, float]:
    try:
        figures = extract(cycle.record(smooth, thin=thin, at_end=at_end))
    except MeasurementError:
        return {}
    return {name: figure.value for name, figure in figures.items() if figure.value is not None}


def _repeat(cycle: Cycle, smooth: Mapping[str, Samples], generator: np.random.Generator) -> dict[str, float]:
    again = {}
    for name, value in smooth.items():
        trace = cycle.traces[name]
        again[name] = cycle.smoothers[name](_noisy(trace, value, generator))
    return _values(cycle, again)


def _noisy(trace: Trace, value: Samples, generator: np.random.Generator) -> Samples:
    noise: Samples = trace.sigma * generator.standard_normal(value.size)
    turned = np.iscomplexobj(value)
    if turned:
        noise = noise + 1j * trace.sigma * generator.standard_normal(value.size)
    quantum = trace.noise.quantum
    if quantum > 0.0 and not trace.noise.dithered:
        size = np.abs(value) if turned else np.asarray(value, dtype=float)
        nodes = np.linspace(size.min(), size.max(), max(2, min(64, int(np.ptp(size) / quantum / 2.0))))
        shift = np.interp(size, nodes, generator.uniform(-quantum / 2.0, quantum / 2.0, nodes.size))
        noise = noise + (shift * np.exp(1j * np.angle(value)) if turned else shift)
    return np.asarray(value + noise)


def _blur(value: Samples) -> Samples:
    """Average the straight lines between cells over one cell's distance."""
    blurred = np.array(value)
    blurred[1:-1] += (value[:-2] - 2.0 * value[1:-1] + value[2:]) / 8.0
    return blurred
