"""Figures of the switching itself: command, driver and junctions, the RF envelope, all drivers at the same edge."""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from transim.quantities import format_quantity
from transim.report.cycle import Cycle, edge_span, lead_in
from transim.report.style import axis_scale, draw_series, drawn, label_lines, name_axis, new_figure
from transim.report.trace import Trace

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

__all__ = ["cycle_figure", "envelope_figure", "overlay_figure", "show_traces"]

EDGES = ("on", "off")
_GREY = "#5d6570"
#: Lowest level that an axis in dB reaches, below its highest [dB].
_DEPTH = 100.0


@drawn
def cycle_figure(cycle: Cycle) -> Figure:
    """Draw command, driver and junctions over the judged cycle.

    Parameters
    ----------
    cycle : Cycle
        One case.

    Returns
    -------
    Figure
        One panel a quantity, on one time axis.
    """
    groups = [
        ("voltage", (cycle.control, cycle.drive_voltage)),
        ("driver output current", (cycle.drive_current,)),
        ("junction current", cycle.currents),
        ("junction charge", cycle.charges),
    ]
    groups = [group for group in groups if group[1]]
    figure, panels = new_figure(
        cycle.title, f"driver {cycle.name}: judged cycle without RF", len(groups), height=1.7, sharex=True
    )
    span = (cycle.timing.start, cycle.timing.stop)
    for axes, (name, traces) in zip(panels[:, 0], groups, strict=True):
        show_traces(axes, traces, 0.0, span, name)
    name_axis(panels[-1, 0], "x", "time from the command's rising edge", axis_scale("s", *span)[1])
    return figure


def show_traces(
    axes: Axes, traces: Sequence[Trace], zero: float, span: tuple[float, float], name: str, *, labels: bool = True
) -> None:
    """Draw real traces into a panel.

    Parameters
    ----------
    axes : Axes
        The panel.
    traces : sequence of Trace
        Of one unit.
    zero : float
        Instant that the time axis starts to count from [s].
    span : tuple of float
        What is shown of it, counted from `zero` [s].
    name : str
        Of the quantity, for the vertical axis.
    labels : bool
        Whether each line is named beside the panel.
    """
    times, _ = axis_scale("s", *span)
    cut = [trace.between(zero + span[0], zero + span[1]) for trace in traces]
    scale, unit = axis_scale(traces[0].unit, *(trace.value.real for trace in cut))
    lines = [
        draw_series(axes, place, (trace.time - zero) * times, trace.value.real * scale, trace.name)
        for place, trace in enumerate(cut)
    ]
    axes.set_xlim(span[0] * times, span[1] * times)
    name_axis(axes, "y", name, unit)
    if labels:
        label_lines(axes, lines)


@drawn
def envelope_figure(cycle: Cycle, carrier: float) -> Figure:
    """Draw the RF envelope at both edges, linear and in dB, with the instants that the figures count.

    Parameters
    ----------
    cycle : Cycle
        One case.
    carrier : float
        One of its carriers [Hz].

    Returns
    -------
    Figure
        On edge left, off edge right; above linear, below in dB.
    """
    analyses = [analysis for analysis, frequency in cycle.envelopes if frequency == carrier]
    traces = {analysis: cycle.envelopes[analysis, carrier] for analysis in analyses}
    basis = cycle.definitions.basis
    figure, panels = new_figure(
        cycle.title,
        f"driver {cycle.name}: RF envelope at {format_quantity(carrier, 'Hz', 12)};"
        f" 10 and 90 % of RF {basis}, times from the command's 50 % points",
        2,
        2,
        height=2.8,
        sharex="col",
        sharey="row",
    )
    for column, edge in enumerate(EDGES):
        linear, level = panels[:, column]
        span = _envelope_span(cycle, edge, analyses, carrier)
        times, unit = axis_scale("s", span)
        zero, low = cycle.edge(edge), lead_in(cycle, edge, span)
        drawn_lines: list[list[object]] = [[], []]
        for place, (analysis, trace) in enumerate(traces.items()):
            cut = trace.between(zero + low, zero + span)
            name = "envelope" if analysis == "envelope" else "resolved"
            for axes, part, lines in zip(panels[:, column], (cut.magnitude(), cut.level()), drawn_lines, strict=True):
                lines.append(draw_series(axes, place, (part.time - zero) * times, part.value.real, name, marker="None"))
        _mark_times(linear, level, cycle, edge, analyses[0], carrier)
        linear.set_xlim(low * times, span * times)
        linear.set_title(f"{edge} edge")
        name_axis(level, "x", f"time from the {edge} edge", unit)
    _frame_levels(panels, cycle, list(traces.values()), analyses[0], carrier)
    if len(traces) > 1:
        for axes in panels[:, 1]:
            label_lines(axes, [line for line in axes.get_lines() if not str(line.get_label()).startswith("_")])
    return figure


def _envelope_span(cycle: Cycle, edge: str, analyses: Sequence[str], carrier: float) -> float:
    names = ("on_time", "on_settling") if edge == "on" else ("off_time", "off_settling")
    marks = [cycle.value(name, analysis, carrier) for name in names for analysis in analyses]
    return edge_span(cycle, edge, [cycle.envelopes[a, carrier].magnitude() for a in analyses], marks)


def _mark_times(linear: Axes, level: Axes, cycle: Cycle, edge: str, analysis: str, carrier: float) -> None:
    """Mark the 10 and 90 % instants and the settling of one edge."""
    full = cycle.full_level(analysis, carrier)
    times = axis_scale("s", _envelope_span(cycle, edge, [analysis], carrier))[0]
    root = 0.5 if cycle.definitions.basis == "power" else 1.0
    delays = {"on": (("10 %", "on_delay", 0.1), ("90 %", "on_time", 0.9))}
    delays["off"] = (("90 %", "off_delay", 0.9), ("10 %", "off_time", 0.1))
    right = axis_room(cycle, edge, analysis, carrier)
    for text, metric, share in delays[edge]:
        value = cycle.value(metric, analysis, carrier)
        if full is None:
            continue
        height = full * share**root
        linear.axhline(height, color=_GREY, linewidth=0.7, linestyle=(0, (2, 2)))
        level.axhline(20.0 * math.log10(height), color=_GREY, linewidth=0.7, linestyle=(0, (2, 2)))
        if value is None:
            continue
        for axes, y in ((linear, height), (level, 20.0 * math.log10(height))):
            axes.plot(
                [value * times], [y], "o", color="black", markerfacecolor="white", markersize=5.5, zorder=5,
                label="_mark",
            )
        # beside the curve: above it where it falls from the left, below it where it rises
        left = value > 0.6 * right or (edge == "off" and share < 0.5 and value > 0.25 * right)
        above = share < 0.5 or (edge == "off" and not left)
        linear.annotate(
            f"{text}: {format_quantity(value, 's')}",
            (value * times, height),
            xytext=(-8 if left else 8, 6 if above else -12),
            textcoords="offset points",
            ha="right" if left else "left",
            bbox=_PAPER,
        )
    _mark_settling(linear, level, cycle, edge, (analysis, carrier, times))


def axis_room(cycle: Cycle, edge: str, analysis: str, carrier: float) -> float:
    """Return the end of the time axis of an edge, counted from it.

    Parameters
    ----------
    cycle : Cycle
        One case.
    edge : {"on", "off"}
        Which edge.
    analysis : str
        ``envelope`` or ``carrier``.
    carrier : float
        [Hz].

    Returns
    -------
    float
        [s].
    """
    return _envelope_span(cycle, edge, [analysis], carrier)


_PAPER = {"boxstyle": "round,pad=0.15", "facecolor": "white", "edgecolor": "none", "alpha": 0.8}


def _mark_settling(linear: Axes, level: Axes, cycle: Cycle, edge: str, place: tuple[str, float, float]) -> None:
    analysis, carrier, times = place
    definitions = cycle.definitions
    value = cycle.value(f"{edge}_settling", analysis, carrier)
    loss = cycle.value("insertion_loss", analysis, carrier)
    if edge == "on":
        if loss is not None:
            band = definitions.settle_band
            level.axhspan(-loss - band, -loss + band, color="#cfd6de", zorder=0.5, label="_band")
        name = f"within {format_quantity(definitions.settle_band, 'dB')}"
    else:
        wanted = definitions.isolation_level
        level.axhline(-wanted, color="black", linewidth=0.8, linestyle=(0, (8, 3)), label="_isolation")
        name = f"{format_quantity(wanted, 'dB')} down"
    text = f"{name}: {'not defined' if value is None else format_quantity(value, 's')}"
    if value is not None:
        for axes in (linear, level):
            axes.axvline(value * times, color="black", linewidth=0.9, linestyle=(0, (1, 2)), label="_settled")
        left = value > 0.5 * axis_room(cycle, edge, analysis, carrier)
        level.annotate(
            text,
            (value * times, 0.42),
            xycoords=("data", "axes fraction"),
            xytext=(-5 if left else 5, 0),
            textcoords="offset points",
            ha="right" if left else "left",
            bbox=_PAPER,
        )
    else:
        level.text(0.97, 0.42, text, transform=level.transAxes, ha="right", bbox=_PAPER)


def _frame_levels(panels: np.ndarray, cycle: Cycle, traces: Sequence[Trace], analysis: str, carrier: float) -> None:
    """Set the vertical axes: linear from zero, dB down to the floor."""
    full = cycle.full_level(analysis, carrier) or 1.0
    highest = max(full, *(float(np.max(np.abs(trace.value))) for trace in traces))
    top = 20.0 * math.log10(highest)
    lowest = min(float(np.min(trace.level().value.real)) for trace in traces)
    wanted = -cycle.definitions.isolation_level
    panels[0, 0].set_ylim(0.0, 1.12 * highest)
    panels[1, 0].set_ylim(max(min(lowest, wanted) - 4.0, top - _DEPTH), top + 3.0)
    name_axis(panels[0, 0], "y", "|S21|, linear", "1")
    name_axis(panels[1, 0], "y", "|S21|", "dB")


@drawn
def overlay_figure(cycles: Sequence[Cycle], analysis: str, carrier: float) -> Figure:
    """Lay the same edge of several drivers over each other.

    Parameters
    ----------
    cycles : sequence of Cycle
        One case of each driver.
    analysis : str
        ``envelope`` or ``carrier``.
    carrier : float
        One of the carriers [Hz].

    Returns
    -------
    Figure
        On edge left, off edge right, each zoomed to the slowest driver; RF in linear and dB, driver current,
        and leakage at the port with the largest.
    """
    first = cycles[0]
    port = max(range(len(first.ports)), key=lambda k: max(np.ptp(cycle.ports[k].value.real) for cycle in cycles))
    rows: list[tuple[str, str, list[Trace]]] = [
        ("|S21|, linear", "1", [cycle.envelopes[analysis, carrier].magnitude() for cycle in cycles]),
        ("|S21|", "dB", [cycle.envelopes[analysis, carrier].level() for cycle in cycles]),
        ("driver current", "A", [cycle.drive_current for cycle in cycles]),
        (f"leakage at {first.ports[port].name}", "V", [cycle.ports[port] for cycle in cycles]),
    ]
    places = f"{format_quantity(carrier, 'Hz', 12)} and {format_quantity(first.temperature, 'degC', 12)}"
    what = "drivers overlaid" if len(cycles) > 1 else f"driver {first.label}"
    figure, panels = new_figure(
        first.title, f"{what} at {places}: the same edge of each", 4, 2, height=1.85, sharex="col", sharey="row"
    )
    for column, edge in enumerate(EDGES):
        span = max(_overlay_span(cycle, edge, analysis, carrier) for cycle in cycles)
        times, unit = axis_scale("s", span)
        panels[0, column].set_title(f"{edge} edge")
        low = max(lead_in(cycle, edge, span) for cycle in cycles)
        panels[0, column].set_xlim(low * times, span * times)
        name_axis(panels[-1, column], "x", f"time from the {edge} edge", unit)
        for axes, (_, unit, traces) in zip(panels[:, column], rows, strict=True):
            scale = _row_scale(unit, traces)[0]
            for place, (cycle, trace) in enumerate(zip(cycles, traces, strict=True)):
                zero = cycle.edge(edge)
                cut = trace.between(zero + low, zero + span)
                draw_series(axes, place, (cut.time - zero) * times, cut.value.real * scale, cycle.label)
    for axes, (name, unit, traces) in zip(panels[:, 0], rows, strict=True):
        name_axis(axes, "y", name, _row_scale(unit, traces)[1])
    _frame_levels(panels, first, [cycle.envelopes[analysis, carrier] for cycle in cycles], analysis, carrier)
    for axes in panels[:, 1]:
        label_lines(axes, list(itertools.islice(axes.get_lines(), len(cycles))))
    return figure


def _row_scale(unit: str, traces: Sequence[Trace]) -> tuple[float, str]:
    return axis_scale(unit, *(trace.value.real for trace in traces))


def _overlay_span(cycle: Cycle, edge: str, analysis: str, carrier: float) -> float:
    names = ("on_time",) if edge == "on" else ("off_time", "off_settling")
    marks = [cycle.value(name, analysis, carrier) for name in names]
    return edge_span(cycle, edge, [cycle.envelopes[analysis, carrier].magnitude()], marks)
