"""Figures of studies over many runs: sweeps, maps with their feasible region, tune windows, spreads."""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from transim.quantities import format_quantity
from transim.report.static_figures import shade_limit
from transim.report.style import (
    COLOURS,
    axis_scale,
    draw_series,
    drawn,
    label_lines,
    log_axis,
    name_axis,
    new_figure,
    short,
)

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

__all__ = ["Bounds", "Quantity", "Window", "spread_figure", "sweep_figure", "sweep_map_figure", "tune_figure"]

Array = npt.NDArray[np.float64]

_GREY = "#5d6570"


@dataclass(frozen=True)
class Quantity:
    """A named quantity and its values.

    Attributes
    ----------
    name : str
        What the axis says.
    unit : str
        SI unit of the values.
    values : ndarray
        NaN where undefined.
    """

    name: str
    unit: str
    values: Array


@dataclass(frozen=True)
class Bounds:
    """What a quantity may be, in its SI unit; None is open.

    Attributes
    ----------
    low, high : float or None
        Both bounds belong to what is allowed.
    """

    low: float | None = None
    high: float | None = None

    def met(self, values: Array) -> npt.NDArray[np.bool_]:
        """Tell which values are inside.

        Parameters
        ----------
        values : ndarray
            In SI.

        Returns
        -------
        ndarray of bool
            False where a value is undefined.
        """
        low = -math.inf if self.low is None else self.low
        high = math.inf if self.high is None else self.high
        return np.isfinite(values) & (values >= low) & (values <= high)

    def scaled(self, scale: float) -> tuple[float | None, float | None]:
        """Return both bounds in the units of an axis.

        Parameters
        ----------
        scale : float
            What to multiply with.

        Returns
        -------
        tuple of float or None
            Low and high.
        """
        return (None if self.low is None else self.low * scale, None if self.high is None else self.high * scale)


@dataclass(frozen=True)
class Window:
    """The window of one component value within which every limit is met.

    Attributes
    ----------
    name, unit : str
        Of the component value.
    allowed : tuple of float
        Between what it was looked for.
    feasible : tuple of float or None
        The window, the other values held; None where there is none.
    chosen : float
        The value that was found.
    """

    name: str
    unit: str
    allowed: tuple[float, float]
    feasible: tuple[float, float] | None
    chosen: float


@drawn
def sweep_figure(title: str, parameter: Quantity, name: str, curves: Sequence[Quantity], bounds: Bounds) -> Figure:
    """Draw one figure of merit against a parameter.

    Parameters
    ----------
    title : str
        Of the design.
    parameter : Quantity
        What was swept, values of shape (n,).
    name : str
        Of the figure.
    curves : sequence of Quantity
        Of one unit, each of shape (n,); the name is that of the line: a driver or a carrier. Where a value is
        NaN, the line is interrupted.
    bounds : Bounds
        What the figure may be; the rest is hatched.

    Returns
    -------
    Figure
    """
    figure, panels = new_figure(title, f"{name} against {parameter.name}", height=3.8)
    axes = panels[0, 0]
    across, x_unit = _parameter_scale(parameter.unit, parameter.values)
    up, y_unit = axis_scale(curves[0].unit, *(curve.values[np.isfinite(curve.values)] for curve in curves))
    x = parameter.values * across
    _space(axes, "x", parameter.unit, x)
    lines = [
        draw_series(axes, place, x, curve.values * up, curve.name, markevery=1) for place, curve in enumerate(curves)
    ]
    axes.margins(y=0.12)
    shade_limit(axes, *bounds.scaled(up))
    name_axis(axes, "x", parameter.name, x_unit)
    name_axis(axes, "y", name, y_unit)
    label_lines(axes, lines)
    return figure


@drawn
def sweep_map_figure(title: str, x: Quantity, y: Quantity, z: Quantity, feasible: npt.NDArray[np.bool_]) -> Figure:
    """Draw a figure of merit over two parameters, with the region in which every limit is met.

    Parameters
    ----------
    title : str
        Of the design.
    x, y : Quantity
        The two parameters, shapes (n,) and (m,), increasing.
    z : Quantity
        The figure, shape (m, n); NaN where undefined.
    feasible : ndarray of bool, shape (m, n)
        Where every limit is met.

    Returns
    -------
    Figure
        Light is small. What is not feasible is hatched, and the border of the feasible region is a thick line;
        a cross marks where the figure is undefined.
    """
    figure, panels = new_figure(title, f"{z.name} over {x.name} and {y.name}; hatched: a limit is missed", height=4.6)
    axes = panels[0, 0]
    across, x_unit = _parameter_scale(x.unit, x.values)
    up, y_unit = _parameter_scale(y.unit, y.values)
    known = z.values[np.isfinite(z.values)]
    scale, z_unit = axis_scale(z.unit, known)
    _space(axes, "x", x.unit, x.values * across)
    _space(axes, "y", y.unit, y.values * up)
    horizontal, vertical = _borders(x.values * across), _borders(y.values * up)
    mesh = axes.pcolormesh(horizontal, vertical, np.ma.masked_invalid(z.values * scale), cmap="cividis_r", zorder=1.0)
    axes.set_xlim(horizontal[0], horizontal[-1])
    axes.set_ylim(vertical[0], vertical[-1])
    axes.grid(visible=False)
    _hatch(axes, horizontal, vertical, feasible)
    rows, columns = np.nonzero(~np.isfinite(z.values))
    axes.plot(x.values[columns] * across, y.values[rows] * up, "x", color="black", markersize=4, label="_undefined")
    figure.colorbar(mesh, ax=axes, pad=0.02).set_label(f"{z.name} [{z_unit}]")
    name_axis(axes, "x", x.name, x_unit)
    name_axis(axes, "y", y.name, y_unit)
    return figure


def _hatch(axes: Axes, horizontal: Array, vertical: Array, feasible: npt.NDArray[np.bool_]) -> None:
    """Hatch what is not feasible, and draw the border between both kinds along the cells."""
    from matplotlib.collections import LineCollection
    from matplotlib.patches import Rectangle

    segments = []
    rows, columns = feasible.shape
    for row in range(rows):
        low, high = vertical[row], vertical[row + 1]
        # neighbours are hatched together, or a fine map would take minutes
        for good, run in itertools.groupby(range(columns), key=feasible[row].item):
            cells = list(run)
            left, right = horizontal[cells[0]], horizontal[cells[-1] + 1]
            # dark on light and light on dark: one of the two shows on every colour
            for colour, width in () if good else (("white", 1.6), ("#303030", 0.6)):
                strip = Rectangle((left, low), right - left, high - low)
                strip.set(facecolor="none", edgecolor=colour, hatch="///", linewidth=0.0, zorder=2.0)
                strip.set_hatch_linewidth(width)
                axes.add_patch(strip)
        for column in range(columns):
            left, right = horizontal[column], horizontal[column + 1]
            if column + 1 < columns and feasible[row, column] != feasible[row, column + 1]:
                segments.append([(right, low), (right, high)])
            if row + 1 < rows and feasible[row, column] != feasible[row + 1, column]:
                segments.append([(left, high), (right, high)])
    for width, colour in ((3.6, "white"), (1.8, "black")):
        axes.add_collection(LineCollection(segments, colors=colour, linewidths=width, zorder=3.0), autolim=False)


@drawn
def tune_figure(title: str, windows: Sequence[Window]) -> Figure:
    """Draw the windows of the tuned component values.

    Parameters
    ----------
    title : str
        Of the design.
    windows : sequence of Window
        One for each value.

    Returns
    -------
    Figure
        A row a value, over what was allowed: the bar is the window in which every limit is met, the mark the
        value that was found.
    """
    figure, panels = new_figure(
        title,
        "tune windows: bar, where every limit is met with the others held; mark, the chosen value",
        len(windows),
        height=0.95,
    )
    for axes, window in zip(panels[:, 0], windows, strict=True):
        scale, unit = _parameter_scale(window.unit, np.array(window.allowed))
        low, high = (bound * scale for bound in window.allowed)
        _space(axes, "x", window.unit, np.array([low, high]))
        axes.set_xlim(low, high)
        axes.set_ylim(0.0, 1.0)
        axes.set_yticks([])
        chosen = format_quantity(window.chosen, window.unit)
        if window.feasible is None:
            text = f"no window; nearest {chosen}"
        else:
            first, last = (bound * scale for bound in window.feasible)
            axes.axvspan(first, last, ymin=0.25, ymax=0.75, facecolor="#b9c7d6", edgecolor=COLOURS[0], label="window")
            ends = " to ".join(format_quantity(bound, window.unit) for bound in window.feasible)
            text = f"{chosen} in {ends}"
        axes.plot([window.chosen * scale], [0.5], "D", color="black", markersize=6, label="chosen", clip_on=False)
        axes.set_title(f"{short(window.name, 60)}: {text}")
        name_axis(axes, "x", short(window.name), unit)
    return figure


@drawn
def spread_figure(title: str, values: Quantity, bounds: Bounds, nominal: float | None = None) -> Figure:
    """Draw the distribution of a figure of merit over a spread, with its limits.

    Parameters
    ----------
    title : str
        Of the design.
    values : Quantity
        One value a sample; undefined ones are counted in the heading, never drawn.
    bounds : Bounds
        What the figure may be; the rest is hatched.
    nominal : float or None
        The value of the nominal design.

    Returns
    -------
    Figure
    """
    good = values.values[np.isfinite(values.values)]
    inside = int(bounds.met(good).sum())
    lost = values.values.size - good.size
    counted = f"{inside} of {values.values.size} inside the limits" + (f", {lost} undefined" if lost else "")
    figure, panels = new_figure(title, f"{values.name}: {counted}", height=3.4)
    axes = panels[0, 0]
    scale, unit = axis_scale(values.unit, good)
    if good.size:
        bins = int(np.clip(round(2.0 * good.size ** (1.0 / 3.0)), 5, 60))
        axes.hist(good * scale, bins=bins, color="#9fb4c8", edgecolor=COLOURS[0], linewidth=0.8, zorder=2.0)
    if nominal is not None and math.isfinite(nominal):
        axes.axvline(nominal * scale, color="black", linewidth=1.2, linestyle=(0, (5, 2)), zorder=3.0, label="_nominal")
        axes.annotate(
            f"nominal {format_quantity(nominal, values.unit)}",
            (nominal * scale, 0.97),
            xycoords=("data", "axes fraction"),
            xytext=(5, 0),
            textcoords="offset points",
            va="top",
            zorder=4.0,
            bbox={"boxstyle": "round,pad=0.15", "facecolor": "white", "edgecolor": "none", "alpha": 0.85},
        )
    shade_limit(axes, *bounds.scaled(scale), side="x")
    axes.set_ylim(0.0, 1.18 * axes.dataLim.ymax if good.size else 1.0)
    axes.locator_params(axis="y", integer=True)
    axes.set_ylabel("samples [1]")
    name_axis(axes, "x", values.name, unit)
    return figure


def _steep(values: Array) -> bool:
    """Tell whether an axis is logarithmic: all values positive, and over more than a decade."""
    good = values[np.isfinite(values)]
    return bool(good.size and good.min() > 0.0 and good.max() > 10.0 * good.min())


def _parameter_scale(unit: str, values: Array) -> tuple[float, str]:
    """Choose the prefix of an axis; on a logarithmic one every tick has its own."""
    return (1.0, unit) if _steep(values) else axis_scale(unit, values)


def _space(axes: Axes, side: str, unit: str, values: Array) -> None:
    """Choose a logarithmic axis where the values span more than a decade."""
    if _steep(values):
        log_axis(axes, side, unit)


def _borders(centres: Array) -> Array:
    """Return the borders of cells around values: half way between them, in ratio where the axis is logarithmic."""
    if centres.size == 1:
        half = abs(centres[0]) / 2.0 or 0.5
        return np.array([centres[0] - half, centres[0] + half])
    steep = _steep(centres)
    line = np.log(centres) if steep else centres
    middle = (line[:-1] + line[1:]) / 2.0
    edges = np.concatenate(([2.0 * line[0] - middle[0]], middle, [2.0 * line[-1] - middle[-1]]))
    return np.exp(edges) if steep else edges
