"""The figure of what a fit leaves."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from transim.report.fitting import Residuals
from transim.report.style import axis_scale, draw_series, drawn, name_axis, new_figure, short

if TYPE_CHECKING:
    from matplotlib.figure import Figure

__all__ = ["residual_figure"]


@drawn
def residual_figure(title: str, residuals: Sequence[Residuals]) -> Figure:
    """Draw residuals, one panel a source.

    Parameters
    ----------
    title : str
        Of the design.
    residuals : sequence of Residuals
        What the fit leaves.

    Returns
    -------
    Figure
        Measured less computed in standard deviations, against time or the row of the table.
    """
    figure, panels = new_figure(title, "measured less fitted, in standard deviations of the data", len(residuals))
    for axes, one in zip(panels[:, 0], residuals, strict=True):
        timed = one.place.size > 0 and float(one.place.max()) < 1.0
        scale, unit = axis_scale("s", one.place) if timed else (1.0, "1")
        draw_series(
            axes, 0, one.place * scale, one.value, one.source, linestyle="none", marker="o", markevery=1, markersize=2.5
        )
        axes.axhline(0.0, color="#5d6570", linewidth=0.8)
        name_axis(axes, "x", "time" if timed else "row", unit)
        name_axis(axes, "y", f"residual, {short(one.source)}", "1")
    return figure
