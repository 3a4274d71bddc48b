"""Waveform panels of the report page: zoomable, with one time axis and one cursor for all of them."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from transim.measure.metrics import METRICS
from transim.quantities import format_quantity
from transim.report.cycle import Cycle
from transim.report.style import COLOURS, DASHES, axis_scale, short
from transim.report.trace import Trace, thinned

__all__ = ["MOST_POINTS", "Panel", "embed_panels", "key_of", "panels_of", "thinned_note", "time_scale"]

#: Most samples of one trace on a page, and of all traces together.
MOST_POINTS, _ALL_POINTS = 5000, 120_000
_FEWEST = 200
_GREY = "#5d6570"
_WIDTH = 1.8


@dataclass(frozen=True)
class Panel:
    """Traces that share a vertical axis.

    Attributes
    ----------
    group : str
        Heading that it stands under.
    name : str
        Of the quantity.
    unit : str
        SI unit.
    traces : tuple of (int, Trace)
        Number of the case, and its trace with real values.
    marks : tuple of (int, float, float)
        Points to mark: number of the case, instant [s] and value.
    across : {"time", "frequency"}
        What the horizontal axis is; with frequencies the traces hold them in place of the instants [Hz].
    """

    group: str
    name: str
    unit: str
    traces: tuple[tuple[int, Trace], ...]
    marks: tuple[tuple[int, float, float], ...] = field(default=())
    across: str = "time"


def panels_of(cycles: Sequence[Cycle]) -> tuple[Panel, ...]:
    """Lay out the panels of a run.

    Parameters
    ----------
    cycles : sequence of Cycle
        One a case.

    Returns
    -------
    tuple of Panel
        RF envelope of each carrier, then driver, leakage, junctions.
    """
    return tuple(_thin(panel, cycles) for panel in _all_panels(cycles))


def _all_panels(cycles: Sequence[Cycle]) -> Iterator[Panel]:
    for analysis, carrier in cycles[0].envelopes:
        numbered = [(k, cycle.envelopes[analysis, carrier]) for k, cycle in enumerate(cycles)]
        name = f"|S21| at {numbered[0][1].name}"
        levels = tuple((k, trace.level()) for k, trace in numbered)
        sizes = tuple((k, trace.magnitude()) for k, trace in numbered)
        yield Panel("RF envelope", name, "dB", levels, _marks(cycles, levels, analysis, carrier))
        yield Panel("RF envelope", f"{name}, linear", "1", sizes, _marks(cycles, sizes, analysis, carrier))
    yield Panel("Command and driver", "command", "V", ((0, cycles[0].control),))
    single = {"driver output voltage": "drive_voltage", "driver output current": "drive_current"}
    for name, attribute in single.items():
        traces = tuple((k, getattr(cycle, attribute)) for k, cycle in enumerate(cycles))
        yield Panel("Command and driver", name, traces[0][1].unit, traces)
    several = (
        ("Video leakage without RF", "voltage at", "ports"),
        ("Junctions", "current of", "currents"),
        ("Junctions", "charge of", "charges"),
    )
    for group, name, attribute in several:
        for place, first in enumerate(getattr(cycles[0], attribute)):
            traces = tuple((k, getattr(cycle, attribute)[place]) for k, cycle in enumerate(cycles))
            yield Panel(group, f"{name} {first.name}", first.unit, traces)
    if all(cycle.static is not None for cycle in cycles):
        yield from _static_panels(cycles)


def _static_panels(cycles: Sequence[Cycle]) -> Iterator[Panel]:
    sweeps = [cycle.static for cycle in cycles if cycle.static is not None]
    for metric in sweeps[0].figures():
        for port in range(sweeps[0].figures()[metric].shape[1]):
            several = sweeps[0].figures()[metric].shape[1] > 1
            name = METRICS[metric].title + (f", port {sweeps[0].pair[port]}" if several else "")
            traces = tuple(
                (k, Trace(name, "dB", sweep.frequency, sweep.figures()[metric][:, port]))
                for k, sweep in enumerate(sweeps)
            )
            yield Panel("Settled states against frequency", name, "dB", traces, across="frequency")


def _marks(
    cycles: Sequence[Cycle], traces: Sequence[tuple[int, Trace]], analysis: str, carrier: float
) -> tuple[tuple[int, float, float], ...]:
    """Return the 10 and 90 % points of both edges on the traces."""
    found = []
    for k, trace in traces:
        cycle = cycles[k]
        for metric in ("on_delay", "on_time", "off_delay", "off_time"):
            value = cycle.value(metric, analysis, carrier)
            if value is not None:
                instant = cycle.edge(metric.partition("_")[0]) + value
                found.append((k, instant, float(np.interp(instant, trace.time, trace.value.real))))
    return tuple(found)


def _thin(panel: Panel, cycles: Sequence[Cycle]) -> Panel:
    count = sum(len(list(panel.traces)) for panel in _all_panels(cycles))
    points = int(np.clip(_ALL_POINTS // count, _FEWEST, MOST_POINTS))
    traces = tuple((k, thinned(trace, points)) for k, trace in panel.traces)
    return replace(panel, traces=traces)


def embed_panels(panels: Sequence[Panel], cycles: Sequence[Cycle], code: str) -> tuple[str, list[dict[str, Any]]]:
    """Turn panels into what a page holds.

    Parameters
    ----------
    panels : sequence of Panel
        The panels.
    cycles : sequence of Cycle
        The cases that they count.
    code : str
        JavaScript that shows the values under the cursor; gets ``cb_obj``, ``panel`` and ``cursor``.

    Returns
    -------
    script : str
        A script element with all data.
    groups : list of dict
        ``name`` and ``panels`` of each heading; a panel has ``name`` and ``div``, the element it appears in.
    """
    from bokeh.document import Document
    from bokeh.embed import components
    from bokeh.models import CustomJS

    axes = {"time": _Axis("time", *time_scale(cycles), (cycles[0].timing.start, cycles[0].timing.stop))}
    swept = next((cycle.static for cycle in cycles if cycle.static is not None), None)
    if swept is not None:
        ends = (float(swept.frequency[0]), float(swept.frequency[-1]))
        axes["frequency"] = _Axis("frequency", *axis_scale("Hz", ends[0]), ends)
    plots = []
    for panel in panels:
        plot = _plot(panel, cycles, axes[panel.across])
        reading = CustomJS(args={"panel": plot, "cursor": axes[panel.across].cursor}, code=code)
        for event in ("mousemove", "tap"):
            plot.js_on_event(event, reading)
        plots.append(plot)
    document = Document()
    # held, or every panel that is added has the whole document searched again
    with document.models.freeze():
        for plot in plots:
            document.add_root(plot)
    script, divs = components(plots, wrap_script=True)
    groups: list[dict[str, Any]] = []
    for panel, div in zip(panels, divs, strict=True):
        if not groups or groups[-1]["name"] != panel.group:
            groups.append({"name": panel.group, "panels": []})
        groups[-1]["panels"].append({"name": panel.name, "div": div})
    return script, groups


def time_scale(cycles: Sequence[Cycle]) -> tuple[float, str]:
    """Return the scale of the time axis, which all cases of a design share.

    Parameters
    ----------
    cycles : sequence of Cycle
        The cases.

    Returns
    -------
    float, str
        What to multiply seconds with, and the unit.
    """
    return axis_scale("s", cycles[0].timing.start, cycles[0].timing.stop)


class _Axis:
    """A horizontal axis that panels share, with its cursor."""

    def __init__(self, name: str, scale: float, unit: str, ends: tuple[float, float]) -> None:
        from bokeh.models import Range1d
        from bokeh.models.annotations import Span

        self.scale, self.unit = scale, unit
        self.logarithmic = name == "frequency"
        start, end = ends[0] * scale, ends[1] * scale
        self.range = Range1d(start=start, end=end, bounds=(start, end), name=name)
        self.cursor = Span(dimension="height", line_color="black", line_dash="dotted", line_width=1, visible=False)
        self.label = f"frequency [{unit}]" if self.logarithmic else f"time from the command's rising edge [{unit}]"


def _plot(panel: Panel, cycles: Sequence[Cycle], axis: _Axis) -> Any:
    from bokeh.models import BasicTickFormatter, BoxZoomTool, CrosshairTool, PanTool, WheelZoomTool
    from bokeh.plotting import figure

    times = axis.scale
    scale, symbol = axis_scale(panel.unit, *(trace.value.real for _, trace in panel.traces))
    zoom = BoxZoomTool(dimensions="width")
    plot = figure(
        height=210,
        sizing_mode="stretch_width",
        x_range=axis.range,
        x_axis_type="log" if axis.logarithmic else "linear",
        tools=[
            zoom,
            PanTool(dimensions="width"),
            WheelZoomTool(dimensions="width", modifiers="ctrl"),
            CrosshairTool(overlay=axis.cursor),
        ],
        active_drag=zoom,
        toolbar_location=None,
        x_axis_label=axis.label,
        y_axis_label=f"[{symbol}]",
        output_backend="canvas",
        tags=[symbol, axis.unit],
        min_border_left=66,
        min_border_right=12,
        lod_threshold=None,
    )
    for k, trace in panel.traces:
        dashes = DASHES[k % len(DASHES)]
        drawn = plot.line(
            (trace.time * times).astype(np.float32),
            (trace.value.real * scale).astype(np.float32),
            color=COLOURS[k % len(COLOURS)],
            line_width=_WIDTH,
            line_dash=[max(1, round(_WIDTH * part)) for part in dashes],
            name=cycles[k].name if len(panel.traces) > 1 else panel.name,
        )
        drawn.tags = ["trace", k if len(panel.traces) > 1 else -1]
    for k in dict.fromkeys(mark[0] for mark in panel.marks):
        marks = plot.scatter(
            [instant * times for place, instant, _ in panel.marks if place == k],
            [value * scale for place, _, value in panel.marks if place == k],
            size=6,
            line_color=COLOURS[k % len(COLOURS)],
            fill_color="white",
        )
        marks.tags = ["mark", k]
    if axis.logarithmic:
        plot.xaxis.formatter = BasicTickFormatter(use_scientific=False)
    _dress(plot, panel)
    return plot


def _dress(plot: Any, panel: Panel) -> None:
    """Set the looks that do not depend on the data."""
    plot.y_range.range_padding = 0.08
    if panel.unit == "dB" and panel.across == "time":
        # below this nothing is told by a logarithm of rounding errors
        highest = max(float(trace.value.real.max()) for _, trace in panel.traces)
        lowest = min(float(trace.value.real.min()) for _, trace in panel.traces)
        plot.y_range.end, plot.y_range.start = highest + 4.0, max(lowest - 4.0, highest - 110.0)
    plot.axis.axis_label_text_font_style = "normal"
    plot.axis.axis_label_text_font_size = "12px"
    plot.axis.major_label_text_font_size = "12px"
    plot.axis.axis_line_color = plot.axis.major_tick_line_color = _GREY
    plot.axis.minor_tick_line_color = None
    plot.grid.grid_line_color = "#dfe3e8"
    plot.outline_line_color = _GREY


def key_of(cycles: Sequence[Cycle]) -> list[dict[str, Any]]:
    """Return what the key of the lines shows.

    Parameters
    ----------
    cycles : sequence of Cycle
        The cases.

    Returns
    -------
    list of dict
        ``place``, ``name``, ``colour`` and ``dashes`` (of a drawn line, in pixels) of each.
    """
    return [
        {
            "place": k,
            "name": short(cycle.name, 60),
            "colour": COLOURS[k % len(COLOURS)],
            "dashes": " ".join(f"{max(1, round(_WIDTH * part))}" for part in DASHES[k % len(DASHES)]),
        }
        for k, cycle in enumerate(cycles)
    ]


def thinned_note(panels: Sequence[Panel], cycles: Sequence[Cycle]) -> str | None:
    """Say whether samples were left out.

    Parameters
    ----------
    panels : sequence of Panel
        As they are shown.
    cycles : sequence of Cycle
        As they were simulated.

    Returns
    -------
    str or None
        None where every sample is shown.
    """
    shown = max(trace.time.size for panel in panels for _, trace in panel.traces)
    there = max(trace.time.size for panel in _all_panels(cycles) for _, trace in panel.traces)
    if shown >= there:
        return None
    return (
        f"Waveforms are shown with at most {shown} of up to {there} samples; the extremes of every stretch are kept"
        f" ({format_quantity(there / shown, '1', 3)} times fewer)."
    )
