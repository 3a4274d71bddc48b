"""Figures of the settled states: loss and isolation of all drivers against frequency, with their limits."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from transim.measure.limits import Limit
from transim.measure.metrics import METRICS
from transim.measure.sweep import BiasSweep
from transim.quantities import format_quantity
from transim.report.cycle import Cycle
from transim.report.style import axis_scale, draw_series, drawn, label_lines, log_axis, name_axis, new_figure

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

__all__ = ["bias_figure", "shade_limit", "static_figure"]

_SHOWN = ("insertion_loss", "isolation", "return_loss_on", "return_loss_off")


@drawn
def static_figure(cycles: Sequence[Cycle], limits: Sequence[Limit]) -> Figure:
    """Draw loss, isolation and match of the settled states against frequency.

    Parameters
    ----------
    cycles : sequence of Cycle
        One case of each driver, at one temperature.
    limits : sequence of Limit
        Of the design; what a limit forbids is shaded.

    Returns
    -------
    Figure
        Over the frequencies of the design's sweep where it asks for one, return losses at the worst port; else at
        its carriers, with straight lines between them.
    """
    first = cycles[0]
    swept = all(cycle.static is not None for cycle in cycles)
    carriers = np.array(sorted({frequency for _, frequency in first.envelopes}))
    frequencies = first.static.frequency if swept and first.static is not None else carriers
    where = "; return loss of the worst port" if swept else ", at the carriers of the design"
    figure, panels = new_figure(
        first.title,
        f"settled states at {format_quantity(first.temperature, 'degC', 12)}{where}; hatched: outside a limit",
        2,
        2,
        height=2.4,
        sharex="all",
    )
    by_name = {limit.metric: limit for limit in limits}
    for axes, metric in zip(panels.ravel(), _SHOWN, strict=True):
        lines = []
        for place, cycle in enumerate(cycles):
            if swept and cycle.static is not None:
                values = cycle.static.figures()[metric].min(axis=1)
                lines.append(draw_series(axes, place, frequencies, values, cycle.label))
            else:
                values = np.array([_value(cycle, metric, float(carrier)) for carrier in carriers])
                lines.append(draw_series(axes, place, carriers, values, cycle.label, markevery=1))
        _frame_frequencies(axes, frequencies)
        axes.margins(y=0.08 if swept else 0.25)
        axes.set_title(METRICS[metric].title)
        name_axis(axes, "y", metric.replace("_", " "), "dB")
        if metric in by_name:
            shade_limit(axes, by_name[metric].min, by_name[metric].max)
        label_lines(axes, lines)
    for axes in panels[-1]:
        name_axis(axes, "x", "frequency", "Hz")
    return figure


@drawn
def bias_figure(title: str, sweep: BiasSweep) -> Figure:
    """Draw the switch as an attenuator that its holding current sets.

    Parameters
    ----------
    title : str
        Of the design.
    sweep : BiasSweep
        At one temperature.

    Returns
    -------
    Figure
        Attenuation, and charge of each junction, over the holding current.
    """
    groups = [("attenuation", "dB", dict(zip(_names(sweep), sweep.attenuation.T, strict=True)))]
    if sweep.charge:
        groups.append(("junction charge", "C", dict(sweep.charge)))
    figure, panels = new_figure(
        title,
        f"settled states over the holding current, at {format_quantity(sweep.temperature, 'degC', 12)}",
        len(groups),
        height=2.6,
        sharex="all",
    )
    steep = bool(sweep.current.min() > 0.0 and sweep.current.max() > 10.0 * sweep.current.min())
    across, unit = (1.0, "A") if steep else axis_scale("A", sweep.current)
    for axes, (name, symbol, curves) in zip(panels[:, 0], groups, strict=True):
        scale, label = axis_scale(symbol, *curves.values())
        lines = [
            draw_series(axes, place, sweep.current * across, values * scale, key, markevery=1)
            for place, (key, values) in enumerate(curves.items())
        ]
        if steep:
            log_axis(axes, "x", "A")
        name_axis(axes, "y", name, label)
        label_lines(axes, lines)
    name_axis(panels[-1, 0], "x", "holding current", unit)
    return figure


def _names(sweep: BiasSweep) -> list[str]:
    return [format_quantity(carrier, "Hz", 12) for carrier in sweep.carriers]


def shade_limit(axes: Axes, low: float | None, high: float | None, side: str = "y") -> None:
    """Hatch what a limit forbids, and widen the panel so that the limit is in sight.

    Parameters
    ----------
    axes : Axes
        A panel with its data.
    low, high : float or None
        Bounds in the units of the axis.
    side : {"x", "y"}
        The axis that the limit is on.
    """
    bottom, top = getattr(axes, f"get_{side}lim")()
    bounds = [bound for bound in (low, high) if bound is not None and math.isfinite(bound)]
    room = 0.12 * (max([top, *bounds]) - min([bottom, *bounds]))
    bottom = min([bottom, *(bound - room for bound in bounds)])
    top = max([top, *(bound + room for bound in bounds)])
    getattr(axes, f"set_{side}lim")(bottom, top)
    span, line = (axes.axhspan, axes.axhline) if side == "y" else (axes.axvspan, axes.axvline)
    for bound, far in ((low, bottom), (high, top)):
        if bound is None or not math.isfinite(bound):
            continue
        span(
            min(bound, far), max(bound, far), facecolor="#eceef1", edgecolor="#9aa3ad", hatch="///", linewidth=0.0,
            zorder=0.3, label="_forbidden",
        )  # fmt: skip
        line(bound, color="black", linewidth=1.0, label="_limit")


def _value(cycle: Cycle, metric: str, carrier: float) -> float:
    for analysis, frequency in cycle.envelopes:
        value = cycle.value(metric, analysis, carrier) if frequency == carrier else None
        if value is not None:
            return value
    return math.nan


def _frame_frequencies(axes: Axes, carriers: np.ndarray) -> None:
    low, high = float(carriers.min()), float(carriers.max())
    if high > 4.0 * low:
        log_axis(axes, "x", "Hz")
        axes.set_xlim(low / 1.3, high * 1.3)
    else:
        margin = 0.1 * (high - low) or 0.1 * high
        axes.set_xlim(low - margin, high + margin)
        axes.xaxis.set_major_formatter(lambda value, _: format_quantity(value, "Hz"))
    if carriers.size <= 6:
        axes.set_xticks(carriers, [format_quantity(value, "Hz") for value in carriers.tolist()])
